import { requireLength } from "./kernels.js";

/** First entry of a matrix row that is not zero, and the entry after the last one; equal when all are. */
export interface RowSpan {
  readonly from: number;
  readonly to: number;
}

/** Where the rows of a complex matrix [rows, columns] are not zero. */
export function rowSpans(matrix: Float32Array, rows: number, columns: number): RowSpan[] {
  return Array.from({ length: rows }, (_, row) => {
    let from = 0;
    let to = columns;
    while (to > 0 && isZero(matrix, row * columns + to - 1)) to--;
    while (from < to && isZero(matrix, row * columns + from)) from++;
    return { from, to };
  });
}

function isZero(matrix: Float32Array, entry: number): boolean {
  return matrix[2 * entry] === 0 && matrix[2 * entry + 1] === 0;
}

/** @throws RangeError unless the arrays of Kernels.mixChannels have their shapes */
export function checkMixing(
  source: Float32Array,
  target: Float32Array,
  matrix: Float32Array,
  lines: number,
  inChannels: number,
  outChannels: number,
  samples: number,
): void {
  requireLength("source", source, 2 * lines * inChannels * samples);
  requireLength("target", target, 2 * lines * outChannels * samples);
  requireLength("matrix", matrix, 2 * outChannels * inChannels);
  if (source === target && inChannels !== outChannels) {
    throw new RangeError(`in place needs equal channels; ${inChannels} in, ${outChannels} out`);
  }
}

/** See Kernels.mixChannels. Every product and sum is rounded to float32, as the SIMD kernel's are. */
export function mixChannels(
  source: Float32Array,
  target: Float32Array,
  matrix: Float32Array,
  lines: number,
  inChannels: number,
  outChannels: number,
  samples: number,
): void {
  checkMixing(source, target, matrix, lines, inChannels, outChannels, samples);
  const spans = rowSpans(matrix, outChannels, inChannels);
  const block = 2 * inChannels * samples;
  const line = new Float32Array(block);
  for (let l = 0; l < lines; l++) {
    line.set(source.subarray(l * block, (l + 1) * block)); // a copy, so that target may be source
    for (let o = 0; o < outChannels; o++) {
      const out = target.subarray(
        2 * (l * outChannels + o) * samples,
        2 * (l * outChannels + o + 1) * samples,
      );
      out.fill(0);
      const { from, to } = spans[o]!;
      for (let c = from; c < to; c++) {
        const entry = 2 * (o * inChannels + c);
        addTimes(
          out,
          line.subarray(2 * c * samples, 2 * (c + 1) * samples),
          matrix[entry]!,
          matrix[entry + 1]!,
        );
      }
    }
  }
}

/** out += (re + i im) x */
function addTimes(out: Float32Array, x: Float32Array, re: number, im: number): void {
  const round = Math.fround;
  for (let s = 0; s < x.length; s += 2) {
    const xRe = x[s]!;
    const xIm = x[s + 1]!;
    out[s] = round(out[s]! + round(re * xRe)) - round(im * xIm);
    out[s + 1] = round(out[s + 1]! + round(re * xIm)) + round(im * xRe);
  }
}
