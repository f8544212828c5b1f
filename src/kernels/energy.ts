import { requireLength, wholeTimes } from "./kernels.js";

/** See Kernels.rootSumOfSquares. float64: no overflow, and a float32 result within half a unit in the last place. */
export function rootSumOfSquares(
  source: Float32Array,
  target: Float32Array,
  outer: number,
  channels: number,
  inner: number,
): void {
  requireLength("source", source, 2 * outer * channels * inner);
  requireLength("target", target, outer * inner);
  const sums = new Float64Array(inner);
  for (let o = 0; o < outer; o++) {
    sums.fill(0);
    for (let c = 0; c < channels; c++) {
      const first = 2 * (o * channels + c) * inner;
      addSquares(source.subarray(first, first + 2 * inner), sums);
    }
    for (let i = 0; i < inner; i++) target[o * inner + i] = Math.sqrt(sums[i]!);
  }
}

/** See Kernels.addEnergy. */
export function addEnergy(source: Float32Array, profile: Float64Array): boolean {
  const rows = wholeTimes("source", source.length, 2 * profile.length);
  for (let row = 0; row < rows; row++) {
    addSquares(source.subarray(2 * row * profile.length, 2 * (row + 1) * profile.length), profile);
  }
  return allFinite(profile);
}

/** Squares of finite float32 never overflow float64, so an infinite or NaN sum means such a sample. */
export function allFinite(values: Float64Array): boolean {
  return values.every((value) => Number.isFinite(value));
}

function addSquares(x: Float32Array, sums: Float64Array): void {
  for (let i = 0; i < sums.length; i++) {
    const re = x[2 * i]!;
    const im = x[2 * i + 1]!;
    sums[i]! += re * re + im * im;
  }
}
