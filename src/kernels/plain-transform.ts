import ndarray from "ndarray";
import fft from "ndarray-fft";
import { axisLengths } from "./axis-lengths.js";
import { PLAIN_LOOPS } from "./plain-loops.js";
import type { AxisTransform, TransformEngine } from "./transform.js";

/**
 * The plain engine: one line at a time through ndarray-fft (radix 2; Bluestein for other lengths) in float64.
 * It runs everywhere and is the reference that the SIMD engine is tested against.
 */
export function createPlainEngine(): TransformEngine {
  return {
    id: "plain",
    loops: PLAIN_LOOPS,
    allocate: (floats) => new Float32Array(floats),
    release: () => {}, // the garbage collector's work
    transformAxis,
  };
}

/**
 * Centred transform along the middle axis of [outer, length, inner] interleaved complex64; see AxisTransform.
 * @throws RangeError when lengths and arrays do not fit together
 */
function transformAxis(job: AxisTransform): void {
  const { source, target, outer, inner, length } = job;
  const { inputLength, outputLength } = axisLengths(job);
  const re = ndarray(new Float64Array(length));
  const im = ndarray(new Float64Array(length));
  // ndarray-fft divides by n on the direction -1, which has the sign of our forward transform.
  const direction = job.inverse ? 1 : -1;
  const gain = (job.scale ?? 1) * (job.inverse ? 1 / Math.sqrt(length) : Math.sqrt(length));
  for (let o = 0; o < outer; o++) {
    for (let i = 0; i < inner; i++) {
      readLine(source, o * inputLength * inner + i, inner, inputLength, re.data, im.data);
      fft(direction, re, im);
      writeLine(target, o * outputLength * inner + i, inner, outputLength, re.data, im.data, gain);
    }
  }
}

/** One strided line into zeroed work arrays, its centre floor(count/2) rotated to index 0. Offsets in complex samples. */
function readLine(
  source: Float32Array,
  first: number,
  stride: number,
  count: number,
  re: Float64Array,
  im: Float64Array,
): void {
  re.fill(0);
  im.fill(0);
  let to = rotated(count, re.length);
  for (let j = 0, from = 2 * first; j < count; j++, from += 2 * stride) {
    re[to] = source[from]!;
    im[to] = source[from + 1]!;
    to = to + 1 === re.length ? 0 : to + 1;
  }
}

/** The `count` samples about index 0 of the work arrays, times `gain`, to a strided line with its centre at floor(count/2). */
function writeLine(
  target: Float32Array,
  first: number,
  stride: number,
  count: number,
  re: Float64Array,
  im: Float64Array,
  gain: number,
): void {
  let from = rotated(count, re.length);
  for (let j = 0, to = 2 * first; j < count; j++, to += 2 * stride) {
    target[to] = re[from]! * gain;
    target[to + 1] = im[from]! * gain;
    from = from + 1 === re.length ? 0 : from + 1;
  }
}

/** Where sample 0 of a centred line of `count` samples lies when its centre is rotated to index 0 of `length`. */
function rotated(count: number, length: number): number {
  return (length - Math.floor(count / 2)) % length;
}
