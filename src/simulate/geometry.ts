import type { Acquisition } from "./acquisition.js";

type Vector = readonly [number, number, number];

export interface SliceGeometry {
  /** Centre of the slice's field of view, patient coordinates (LPS), mm. */
  readonly positionMm: Vector;
  readonly readDir: Vector;
  readonly phaseDir: Vector;
  readonly sliceDir: Vector;
}

/** Where a slice lies: the stack is centred on `positionMm`, counters ascend along slice_dir. */
export function sliceGeometry(a: Acquisition, slice: number): SliceGeometry {
  const readDir = turned([1, 0, 0], a.rotationDegrees);
  const phaseDir = turned([0, 1, 0], a.rotationDegrees);
  const sliceDir = turned([0, 0, 1], a.rotationDegrees);
  const [x, y, z] = a.positionMm;
  const offset = sliceOffsetMm(a, slice);
  const positionMm: Vector = [x + offset * sliceDir[0], y + offset * sliceDir[1], z + offset * sliceDir[2]];
  return { positionMm, readDir, phaseDir, sliceDir };
}

/** Distance of a slice from the middle of the stack along slice_dir, mm. */
export function sliceOffsetMm(a: Acquisition, slice: number): number {
  return (slice - (a.sliceOrder.length - 1) / 2) * a.sliceSpacingMm;
}

/** Turn a vector about x, then y, then z (right-handed, the axes stay fixed). */
function turned([x, y, z]: Vector, degrees: Vector): Vector {
  const [aboutX, aboutY, aboutZ] = degrees;
  const [y1, z1] = turnedInPlane(y, z, aboutX);
  const [z2, x2] = turnedInPlane(z1, x, aboutY);
  const [x3, y3] = turnedInPlane(x2, y1, aboutZ);
  return [x3, y3, z2];
}

function turnedInPlane(u: number, v: number, degrees: number): readonly [number, number] {
  const cosine = Math.cos((degrees * Math.PI) / 180);
  const sine = Math.sin((degrees * Math.PI) / 180);
  return [u * cosine - v * sine, u * sine + v * cosine];
}
