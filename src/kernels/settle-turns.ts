import { unwrapPhase, type VolumeSize } from "./unwrap.js";

/** Unwrapped phase with whole turns settled: the largest region so that its mean is nearest zero, the others on its plane. */
export function settleTurns(difference: Float64Array, mask: Uint8Array, size: VolumeSize): Float64Array {
  const unwrapped = unwrapPhase(difference, mask, size);
  const { radians, regions } = unwrapped;
  const shifts = settleRegions(unwrapped, size, 2 * Math.PI);
  for (let i = 0; i < radians.length; i++) if (regions[i]! >= 0) radians[i]! += shifts[regions[i]!]!;
  return radians;
}

/**
 * What to add to each region's phase, in multiples of a step: the largest region, number 0, comes nearest zero in the
 * mean, or gets what is given; each further one comes nearest to the plane through the larger ones, of which those near
 * it count most.
 */
export function settleRegions(
  { radians, regions, regionCount }: Regions,
  size: VolumeSize,
  stepRadians: number,
  ofLargest?: number,
): number[] {
  const places = centresOf(radians, regions, regionCount, size);
  const every = strideOf(radians.length, size.columns);
  const samples = places.map((): Place[] => []);
  for (let i = 0; i < radians.length; i++) {
    const region = regions[i]!;
    if (region >= 0 && (i % every === 0 || samples[region]!.length === 0))
      samples[region]!.push(placeOf(i, radians[i]!, size));
  }
  const settled: Place[] = [];
  return places.map((place, region) => {
    const above = place.radians - (region === 0 ? 0 : planeAt(settled, place));
    const nearest = -stepRadians * Math.round(above / stepRadians);
    const shift = region === 0 ? (ofLargest ?? nearest) : nearest;
    for (const sample of samples[region]!) settled.push({ ...sample, radians: sample.radians + shift });
    return shift;
  });
}

interface Regions {
  readonly radians: ArrayLike<number>;
  /** Number of the region of each pixel, the largest first; -1 outside. */
  readonly regions: Int32Array;
  readonly regionCount: number;
}

/** Pixels of a volume, evenly spread, that the planes go through. */
const SAMPLED = 8192;

/** From one sample to the next; no common factor with the rows' length, so that they do not lie in a few columns. */
function strideOf(pixels: number, columns: number): number {
  const divisor = (a: number, b: number): number => (b === 0 ? a : divisor(b, a % b));
  let stride = Math.ceil(pixels / SAMPLED);
  while (divisor(stride, columns) > 1) stride++;
  return stride;
}

interface Place {
  readonly x: number;
  readonly y: number;
  readonly z: number;
  readonly radians: number;
}

function placeOf(pixel: number, radians: number, { rows, columns }: VolumeSize): Place {
  const row = Math.floor(pixel / columns);
  return { x: pixel % columns, y: row % rows, z: Math.floor(row / rows), radians };
}

/** Mean place and mean phase of each region. */
function centresOf(
  radians: ArrayLike<number>,
  regions: Int32Array,
  regionCount: number,
  size: VolumeSize,
): Place[] {
  const sums = Array.from({ length: regionCount }, () => ({ count: 0, x: 0, y: 0, z: 0, radians: 0 }));
  for (let i = 0; i < radians.length; i++) {
    const sum = sums[regions[i]!];
    if (!sum) continue;
    const place = placeOf(i, radians[i]!, size);
    sum.count++;
    sum.x += place.x;
    sum.y += place.y;
    sum.z += place.z;
    sum.radians += place.radians;
  }
  return sums.map(({ count, x, y, z, radians: phase }) => ({
    x: x / count,
    y: y / count,
    z: z / count,
    radians: phase / count,
  }));
}

/** Least squares plane through some places, each by the inverse fourth power of its distance; its value at a place. */
function planeAt(places: readonly Place[], { x, y, z }: Place): number {
  const matrix = new Float64Array(16);
  const right = new Float64Array(4);
  for (const place of places) {
    const terms = [1, place.x - x, place.y - y, place.z - z];
    const square = terms[1]! ** 2 + terms[2]! ** 2 + terms[3]! ** 2;
    const weight = 1 / (square + 1) ** 2;
    for (let i = 0; i < 4; i++) {
      right[i]! += weight * terms[i]! * place.radians;
      for (let j = 0; j < 4; j++) matrix[4 * i + j]! += weight * terms[i]! * terms[j]!;
    }
  }
  // A slope along which the places hardly differ stays near zero.
  for (let i = 1; i < 4; i++) matrix[5 * i]! += 1e-3 * (matrix[5]! + matrix[10]! + matrix[15]!) + 1e-12;
  for (let k = 3; k > 0; k--) {
    // the slopes eliminated, one by one
    for (let i = 0; i < k; i++) {
      const share = matrix[4 * i + k]! / matrix[5 * k]!;
      right[i]! -= share * right[k]!;
      for (let j = 0; j < k; j++) matrix[4 * i + j]! -= share * matrix[4 * k + j]!;
    }
  }
  return right[0]! / matrix[0]!;
}
