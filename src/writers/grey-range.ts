import { UsageError } from "../errors.js";

/** What the numbers are, which decides how they are shown: magnitudes from black, phases on a fixed scale, real or
 * imaginary parts about a middle grey. */
export type ValueKind = "magnitude" | "phase" | "signed";

/** Values that become black and white; a sidecar states it. */
export interface GreyRange {
  readonly low: number;
  readonly high: number;
  /** How the range was found, in words. */
  readonly rule: string;
}

/**
 * The range in which values of this kind are shown. NaN and infinite values are left out of account.
 * - magnitude: 0 to the 99.5th percentile of the foreground, so that the background is dark and tissue not clipped.
 *   The foreground is what exceeds a tenth of the 99.9th percentile of all pixels: with all pixels as the base, a
 *   small object on a large empty background would be clipped, and with the maximum as the base, a single spike
 *   would darken the rest.
 * - phase: -pi to pi (radians), always.
 * - signed: the same about 0, by the magnitudes of the values.
 */
export function automaticRange(kind: ValueKind, values: ArrayLike<number>): GreyRange {
  if (kind === "phase") return { low: -Math.PI, high: Math.PI, rule: "phase in radians" };
  const sizes = finiteSizes(values).sort();
  const typical = percentile(sizes, 99.9);
  const floor = typical > 0 ? typical / 10 : 0;
  let first = 0;
  while (first < sizes.length && sizes[first]! <= floor) first++;
  const foreground = sizes.subarray(first);
  const found = percentile(foreground, 99.5);
  const high = found > 0 ? found : 1; // an empty picture is black
  const rule = "99.5th percentile of the foreground";
  return { low: kind === "signed" ? -high : 0, high, rule };
}

/** Percentiles of so many pixels, evenly spaced, are good enough to choose a grey range by. */
const ENOUGH_PIXELS = 1 << 16;

/** Magnitudes of the finite values, of every n-th where there are very many. */
function finiteSizes(values: ArrayLike<number>): Float32Array {
  const step = Math.ceil(values.length / ENOUGH_PIXELS);
  const sizes = new Float32Array(Math.ceil(values.length / step));
  let count = 0;
  for (let i = 0; i < values.length; i += step) {
    const size = Math.abs(values[i]!);
    if (size < Number.POSITIVE_INFINITY) sizes[count++] = size;
  }
  return sizes.subarray(0, count);
}

/**
 * A range that the user gave.
 * @throws UsageError where it is not a range
 */
export function absoluteRange(low: number, high: number): GreyRange {
  if (!Number.isFinite(low) || !Number.isFinite(high) || low >= high) {
    throw new UsageError(
      { field: "grey range", value: `${low} to ${high}` },
      "the low value must be below the high one",
    );
  }
  return { low, high, rule: "as given" };
}

/** The percentile of sorted values, linear between neighbours as numpy.percentile; NaN of none. */
export function percentile(sorted: ArrayLike<number>, percent: number): number {
  const at = ((sorted.length - 1) * percent) / 100;
  const below = Math.floor(at);
  const lower = sorted[below] ?? Number.NaN;
  const upper = sorted[Math.min(below + 1, sorted.length - 1)] ?? Number.NaN;
  return lower + (upper - lower) * (at - below);
}

/** Values as 8-bit grey: low is 0, high is 255, the nearest level between, clipped outside; NaN is black. */
export function toGrey8(values: ArrayLike<number>, range: GreyRange): Uint8Array {
  // Uint8ClampedArray clips, rounds to the nearest (a half to even) and makes NaN 0, as is wanted here.
  const levels = new Uint8ClampedArray(values.length);
  const scale = 255 / (range.high - range.low);
  for (let i = 0; i < levels.length; i++) levels[i] = ((values[i] ?? 0) - range.low) * scale;
  return new Uint8Array(levels.buffer);
}

/** Values as 16-bit grey: low is 0, high is 65535; otherwise as `toGrey8`. */
export function toGrey16(values: ArrayLike<number>, range: GreyRange): Uint16Array {
  const levels = new Uint16Array(values.length);
  const scale = 65535 / (range.high - range.low);
  for (let i = 0; i < levels.length; i++) {
    const level = Math.round(((values[i] ?? 0) - range.low) * scale);
    levels[i] = Math.max(0, Math.min(65535, level)); // NaN is stored as 0
  }
  return levels;
}
