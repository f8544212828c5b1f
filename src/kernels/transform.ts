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

export interface TransformEngine {
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
