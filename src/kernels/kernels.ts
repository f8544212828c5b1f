import type { TransformEngine } from "./transform.js";

/**
 * The arithmetic that touches every sample, done by the plain kernels or the SIMD ones. All but the transforms give the
 * same bits in both: float32 operations in a fixed order (float64 where said). Arrays are in C order; "complex" is
 * interleaved complex64. Sources are not modified; a target may be the source itself where their shapes are equal, and
 * must not overlap it otherwise.
 *
 * Every method throws RangeError when an array's length does not fit the others.
 */
export interface Kernels {
  readonly id: "plain" | "simd";
  readonly transform: TransformEngine;

  /**
   * Every sample's channels times a matrix: target[line, o, s] = sum_c matrix[o, c] source[line, c, s], c rising. Zeros
   * before the first and after the last entry of a row are not multiplied, so a triangular matrix costs half.
   * @param source complex [lines, inChannels, samples]
   * @param target complex [lines, outChannels, samples]
   * @param matrix complex [outChannels, inChannels]
   */
  mixChannels(
    source: Float32Array,
    target: Float32Array,
    matrix: Float32Array,
    lines: number,
    inChannels: number,
    outChannels: number,
    samples: number,
  ): void;

  /**
   * Complex samples times a real window along one axis.
   * @param source complex [outer, window.length, inner]; target the same
   * @param inner  complex samples per step along the axis
   */
  multiplyAxis(source: Float32Array, target: Float32Array, window: Float32Array, inner: number): void;

  /** Complex samples [outer, grid.length] times a real grid: a window over the last two or three axes. */
  multiplyGrid(source: Float32Array, target: Float32Array, grid: Float32Array): void;

  /**
   * Root of the sum of squares: target[o, i] = sqrt(sum_c |source[o, c, i]|^2), summed in float64, c rising.
   * @param source complex [outer, channels, inner]
   * @param target real [outer, inner]
   */
  rootSumOfSquares(
    source: Float32Array,
    target: Float32Array,
    outer: number,
    channels: number,
    inner: number,
  ): void;

  /** |source|, complex [n] to real [n]. */
  magnitude(source: Float32Array, target: Float32Array): void;

  /** target += source, floats. */
  add(target: Float32Array, source: Float32Array): void;

  /** data *= factor, floats; the factor is rounded to float32 first. */
  scale(data: Float32Array, factor: number): void;

  /**
   * profile[s] += sum over rows of |source[row, s]|^2, in float64, rows rising.
   * @param source complex [rows, profile.length]
   * @returns whether the profile is finite: false as soon as one sample was NaN or infinite
   */
  addEnergy(source: Float32Array, profile: Float64Array): boolean;

  /** Reverse the byte order of every word, in place. */
  swapWords(words: Uint32Array): void;
}

/** @throws RangeError unless an array has the length that its shape says */
export function requireLength(name: string, array: { readonly length: number }, length: number): void {
  if (array.length !== length) throw new RangeError(`${name} holds ${array.length} values; needs ${length}`);
}

/** How many times `part` fits into `whole`. @throws RangeError unless it does so without a rest */
export function wholeTimes(name: string, whole: number, part: number): number {
  const times = part === 0 ? 0 : whole / part;
  if (!Number.isInteger(times))
    throw new RangeError(`${name} holds ${whole} values; needs a multiple of ${part}`);
  return times;
}
