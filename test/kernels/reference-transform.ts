import type { AxisTransform } from "../../src/kernels/transform.js";

/** Deterministic complex64 samples in (-1, 1): a linear congruential generator (Numerical Recipes constants). */
export function seededSamples(floats: number, seed = 1): Float32Array {
  let state = seed >>> 0;
  return Float32Array.from({ length: floats }, () => {
    state = (Math.imul(state, 1664525) + 1013904223) >>> 0;
    return state / 2 ** 31 - 1;
  });
}

/** The definition in AxisTransform, written out: O(n^2) sums in float64. Returns [outer, outputLength, inner]. */
export function naiveTransform(job: Omit<AxisTransform, "target">): Float64Array {
  const { source, outer, inner, length: n, inputLength = n, outputLength = n, scale = 1 } = job;
  const out = new Float64Array(2 * outer * outputLength * inner);
  const sign = job.inverse ? 1 : -1;
  const cos = Float64Array.from({ length: n }, (_, t) => Math.cos((2 * Math.PI * t) / n));
  const sin = Float64Array.from({ length: n }, (_, t) => sign * Math.sin((2 * Math.PI * t) / n));
  const gain = scale / Math.sqrt(n);
  for (let o = 0; o < outer; o++) {
    for (let i = 0; i < inner; i++) {
      for (let m = 0; m < outputLength; m++) {
        const k = m - Math.floor(outputLength / 2);
        let re = 0;
        let im = 0;
        for (let j = 0; j < inputLength; j++) {
          const x = j - Math.floor(inputLength / 2);
          const turn = (((k * x) % n) + n) % n;
          const at = 2 * ((o * inputLength + j) * inner + i);
          re += source[at]! * cos[turn]! - source[at + 1]! * sin[turn]!;
          im += source[at]! * sin[turn]! + source[at + 1]! * cos[turn]!;
        }
        const to = 2 * ((o * outputLength + m) * inner + i);
        out[to] = gain * re;
        out[to + 1] = gain * im;
      }
    }
  }
  return out;
}

/** |a - b| / |b| over all floats; 0 when both are zero. */
export function relativeL2(a: ArrayLike<number>, b: ArrayLike<number>): number {
  if (a.length !== b.length) throw new Error(`lengths differ: ${a.length} and ${b.length}`);
  let difference = 0;
  let norm = 0;
  for (let i = 0; i < a.length; i++) {
    difference += (a[i]! - b[i]!) ** 2;
    norm += b[i]! ** 2;
  }
  return difference === 0 ? 0 : Math.sqrt(difference / norm);
}
