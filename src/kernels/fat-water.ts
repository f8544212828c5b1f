import { settleRegions } from "./settle-turns.js";
import { unwrapPhase, type VolumeSize } from "./unwrap.js";

/**
 * Water and fat from two or three echoes at which one fat peak is in phase with water or opposed to it, pixel by pixel in
 * the image: the closed forms. They take fat where it is seen, not where it is, and one peak for its spectrum;
 * fat-water-solve.ts does neither.
 */

/** Real maps [slices, rows, columns] in the unit of the images. */
export interface DixonImages {
  readonly water: Float32Array;
  readonly fat: Float32Array;
  /** Radians that the field has turned the signal from the first echo to the second; field = -radians / (2 pi dTE). */
  readonly radians: Float32Array;
}

/**
 * Two points: `W = (I + O) / 2`, `F = (I - O) / 2` with the magnitude I of the in-phase echo and the signed opposed-phase
 * echo O. The sign is what is left of the phase between the echoes when the field's part of it is taken off: half of
 * the unwrapped doubled phase, in which the sign drops out. In the largest connected region the sign is that under which
 * water has the larger sum; in the others that under which their field is nearest to the plane through the larger ones' (settle-turns.ts).
 * @param inPhase interleaved complex64, [slices, rows, columns]
 * @param mask    1 where there is signal; outside, the sign of O is taken as it is
 * Source: Dixon 1984, Radiology 153:189; phase correction: Coombs, Szumowski, Coshow 1997, Magn Reson Med 38:884.
 */
export function twoPointDixon(
  inPhase: Float32Array,
  opposed: Float32Array,
  mask: Uint8Array,
  size: VolumeSize,
): DixonImages {
  const field = halfUnwrapped(mask, size, (i) => {
    const re = opposed[i]! * inPhase[i]! + opposed[i + 1]! * inPhase[i + 1]!;
    const im = opposed[i + 1]! * inPhase[i]! - opposed[i]! * inPhase[i + 1]!;
    return 2 * Math.atan2(im, re);
  });
  return signedHalves(field, size, (p) => {
    const i = 2 * p;
    const length = Math.hypot(inPhase[i]!, inPhase[i + 1]!);
    const re = opposed[i]! * inPhase[i]! + opposed[i + 1]! * inPhase[i + 1]!;
    const im = opposed[i + 1]! * inPhase[i]! - opposed[i]! * inPhase[i + 1]!;
    const angle = field.radians[p]!;
    return [length, length > 0 ? (re * Math.cos(angle) + im * Math.sin(angle)) / length : 0];
  });
}

/**
 * Three points, fat at 0, half a turn and a full turn against water: the field's phase between neighbouring echoes is
 * half of that between the first and the third, unwrapped; the first and third are averaged.
 * @param first, opposed, third interleaved complex64, [slices, rows, columns], equally spaced in time
 * @param mask 1 where there is signal
 * Source: Glover and Schneider 1991, Magn Reson Med 18:371, doi:10.1002/mrm.1910180211.
 */
export function threePointDixon(
  first: Float32Array,
  opposed: Float32Array,
  third: Float32Array,
  mask: Uint8Array,
  size: VolumeSize,
): DixonImages {
  const field = halfUnwrapped(mask, size, (i) =>
    Math.atan2(
      third[i + 1]! * first[i]! - third[i]! * first[i + 1]!,
      third[i]! * first[i]! + third[i + 1]! * first[i + 1]!,
    ),
  );
  return signedHalves(field, size, (p) => {
    const i = 2 * p;
    const c = Math.cos(field.radians[p]!);
    const s = Math.sin(field.radians[p]!);
    const [c2, s2] = [c * c - s * s, 2 * c * s];
    const re = (first[i]! + third[i]! * c2 + third[i + 1]! * s2) / 2;
    const im = (first[i + 1]! + third[i + 1]! * c2 - third[i]! * s2) / 2;
    const inPhase = Math.hypot(re, im);
    const [a, b] = [opposed[i]! * c + opposed[i + 1]! * s, opposed[i + 1]! * c - opposed[i]! * s];
    return [inPhase, inPhase > 0 ? (a * re + b * im) / inPhase : 0];
  });
}

interface HalfPhase {
  readonly radians: Float32Array;
  readonly regions: Int32Array;
  readonly regionCount: number;
}

/** @param doubled twice the phase wanted, of the pixel at float i */
function halfUnwrapped(mask: Uint8Array, size: VolumeSize, doubled: (i: number) => number): HalfPhase {
  const wrapped = new Float64Array(mask.length);
  for (let p = 0; p < mask.length; p++) wrapped[p] = doubled(2 * p);
  const { radians, regions, regionCount } = unwrapPhase(wrapped, mask, size);
  return { radians: Float32Array.from(radians, (value) => value / 2), regions, regionCount };
}

/** Half the sum and half the difference, each region's opposed echo with its own sign. */
function signedHalves(
  field: HalfPhase,
  size: VolumeSize,
  echoes: (pixel: number) => readonly [inPhase: number, opposed: number],
): DixonImages {
  const { radians, regions } = field;
  const inPhase = new Float32Array(radians.length);
  const opposed = new Float32Array(radians.length);
  let largest = 0; // sum of the opposed echo over the largest region, number 0
  for (let p = 0; p < radians.length; p++) {
    [inPhase[p], opposed[p]] = echoes(p);
    if (regions[p] === 0) largest += opposed[p]!;
  }
  const shifts = settleRegions(field, size, Math.PI, largest < 0 ? Math.PI : 0);
  const turnsOf = (p: number) => (regions[p]! >= 0 ? Math.round(shifts[regions[p]!]! / Math.PI) : 0);
  const sign = (p: number) => (turnsOf(p) % 2 === 0 ? 1 : -1);
  return {
    water: inPhase.map((value, p) => (value + sign(p) * opposed[p]!) / 2),
    fat: inPhase.map((value, p) => (value - sign(p) * opposed[p]!) / 2),
    radians: radians.map((value, p) => value + turnsOf(p) * Math.PI),
  };
}

/**
 * Share of fat in the signal, from complex water and fat: `|F| / |W + F|` where fat is the larger, else
 * `1 - |W| / |W + F|`, so that noise of the smaller one does not add to its magnitude. 0 outside the mask.
 * @param water, fat interleaved complex64
 * Source: Liu, McKenzie, Yu, Brittain, Reeder 2007, Magn Reson Med 58:354 (magnitude discrimination).
 */
export function fatFraction(water: Float32Array, fat: Float32Array, mask: ArrayLike<number>): Float32Array {
  const out = new Float32Array(water.length / 2);
  for (let p = 0, i = 0; p < out.length; p++, i += 2) {
    if (!mask[p]) continue;
    const total = Math.hypot(water[i]! + fat[i]!, water[i + 1]! + fat[i + 1]!);
    if (total === 0) continue;
    const [w, f] = [Math.hypot(water[i]!, water[i + 1]!), Math.hypot(fat[i]!, fat[i + 1]!)];
    out[p] = f > w ? f / total : 1 - w / total;
  }
  return out;
}
