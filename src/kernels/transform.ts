/**
 * The seam of the transform engines: one operation, done by the plain engine (ndarray-fft) or the SIMD one.
 *
 * Convention: centred and unitary. Index floor(n/2) is k = 0 and x = 0, for even and odd n:
 * `X[m] = n^-1/2 * sum_j x[j] exp(sign 2 pi i (j - floor(n/2)) (m - floor(n/2)) / n)`, sign -1 forward, +1 inverse.
 */
export interface AxisTransform {
  /** Interleaved complex64 in C order, [outer, inputLength, inner]. */
  readonly source: Float32Array;
  /** Interleaved complex64 in C order, [outer, outputLength, inner]; may be `source` where both lengths are equal. */
  readonly target: Float32Array;
  readonly outer: number;
  readonly inner: number;
  /** Length n of the transform. */
  readonly length: number;
  /** Input shorter than n is zero-filled about floor(inputLength/2) -> floor(n/2); never longer. Default n. */
  readonly inputLength?: number;
  /** Output shorter than n is cropped about floor(n/2) -> floor(outputLength/2); never longer. Default n. */
  readonly outputLength?: number;
  readonly inverse: boolean;
  /** Extra factor on top of the unitary n^-1/2. Default 1. */
  readonly scale?: number;
}

/** Where the kernel of each place lies on a grid, and its values there. */
export interface Taps {
  /** First grid point under the kernel, [rows, places]; may lie outside the row, which is periodic. */
  readonly start: Int32Array;
  /** [rows, places, 6], and two more floats; all zero for a place outside the image. */
  readonly taps: Float32Array;
}

/** Loops beside the transforms that engines do: float32 operations in a fixed order, the same bits in all of them. */
export interface Loops {
  /** Read rows of a periodic grid at places; see row-warp.ts. `target` is [rows, places of a row]. */
  gatherTaps(grid: Float32Array, taps: Taps, rows: number, target: Float32Array): void;
  /** The transpose: add values at places to the rows of a grid. */
  scatterTaps(grid: Float32Array, taps: Taps, rows: number, values: Float32Array): void;
  /** `values *= factors`, complex. The factors serve many values, and must not change between them. */
  multiplyComplex(values: Float32Array, factors: Float32Array): void;
  /** Complex rows times a real gain for each sample of a row; the gains as the factors. */
  scaleRows(rows: Float32Array, gain: Float32Array): void;
  /** `target += conj(weights) source` of complex samples, `source` and `target` from the given floats on. */
  addWeighted(
    source: Float32Array,
    from: number,
    weights: Float32Array,
    target: Float32Array,
    to: number,
  ): void;
}

export interface TransformEngine {
  readonly loops: Loops;
  readonly id: "plain" | "simd";
  /**
   * Floats that this engine can transform fastest.
   * @param zeroed whether every float must be 0; else they may hold anything (default: zeroed)
   */
  allocate(floats: number, zeroed?: boolean): Float32Array;
  /** Give back what `allocate` gave. */
  release(array: Float32Array): void;
  transformAxis(job: AxisTransform): void;
}
