/** ndarray-fft ships no types. It transforms every axis of `re` and `im` in place. */
declare module "ndarray-fft" {
  import type { NdArray } from "ndarray";
  /**
   * @param direction +1: sum of x[j] exp(+2 pi i j k / n); -1: sum of x[j] exp(-2 pi i j k / n), divided by n
   */
  export default function fft(direction: 1 | -1, re: NdArray<Float64Array>, im: NdArray<Float64Array>): void;
}
