import { requireLength, wholeTimes } from "./kernels.js";

/** See Kernels.multiplyAxis. */
export function multiplyAxis(
  source: Float32Array,
  target: Float32Array,
  window: Float32Array,
  inner: number,
): void {
  requireLength("target", target, source.length);
  wholeTimes("source", source.length, 2 * window.length * inner);
  const step = 2 * inner; // floats per step along the axis
  for (let start = 0, k = 0; start < source.length; start += step, k = k + 1 === window.length ? 0 : k + 1) {
    const gain = window[k]!;
    for (let i = start; i < start + step; i++) target[i] = source[i]! * gain;
  }
}

/** See Kernels.add. */
export function add(target: Float32Array, source: Float32Array): void {
  requireLength("source", source, target.length);
  for (let i = 0; i < target.length; i++) target[i] = target[i]! + source[i]!;
}

/** See Kernels.scale. */
export function scale(data: Float32Array, factor: number): void {
  const rounded = Math.fround(factor);
  for (let i = 0; i < data.length; i++) data[i] = data[i]! * rounded;
}

/** See Kernels.swapWords. */
export function swapWords(words: Uint32Array): void {
  for (let i = 0; i < words.length; i++) {
    const word = words[i]!;
    words[i] = (word << 24) | ((word & 0xff00) << 8) | ((word >>> 8) & 0xff00) | (word >>> 24);
  }
}
