import { cropStart } from "../physics/layout.js";
import { type Acquisition, acquiredLines, acquiredSamples } from "./acquisition.js";
import { ExactKSpace, echoPhases, readoutSignal } from "./signal.js";

export interface ExpectedImage {
  readonly axes: readonly ["contrast", "slice", "coil", "y", "x"];
  readonly shape: readonly [contrasts: number, slices: number, coils: number, y: number, x: number];
  /** Interleaved re, im. */
  readonly coilImages: Float64Array;
  /** Root sum of squares over the coils, [contrast, slice, y, x]. */
  readonly rootSumOfSquares: Float64Array;
}

/**
 * What the noise-free data give: exact samples at their encoded places, zeros where nothing was acquired, a centred
 * unitary inverse DFT (a plain sum in double precision), and the central matrix.x columns. Chemical shift and
 * off-resonance displace and dephase here as in the data. Repetitions and averages are all the same.
 */
export function expectedImageOf(a: Acquisition): ExpectedImage {
  const kSpace = new ExactKSpace(a);
  const slices = a.sliceOrder.length;
  const shape = [a.echoTimesSeconds.length, slices, a.coils, a.matrix.y, a.matrix.x] as const;
  const coilImages = new Float64Array(2 * shape.reduce((product, n) => product * n));
  const frameLength = 2 * a.coils * a.matrix.y * a.matrix.x;
  const phases = a.echoTimesSeconds.map((_, echo) => echoPhases(a, echo));
  for (let slice = 0; slice < slices; slice++) {
    for (const [echo, phase] of phases.entries()) {
      const readouts = Array.from({ length: acquiredLines(a) }, (_, line) =>
        readoutSignal(kSpace.line(slice, line, echo), phase, a.coils),
      );
      const start = (echo * slices + slice) * frameLength;
      imageFrame(a, readouts, phase.reversed, coilImages.subarray(start, start + frameLength));
    }
  }
  return {
    axes: ["contrast", "slice", "coil", "y", "x"],
    shape,
    coilImages,
    rootSumOfSquares: rootSumOfSquares(coilImages, shape[0] * slices, a.coils),
  };
}

/** Fill one frame, [coil, y, x], from its readouts, [coil, sample] each in the order of time. */
function imageFrame(
  a: Acquisition,
  readouts: readonly Float64Array[],
  reversed: boolean,
  frame: Float64Array,
): void {
  const samples = acquiredSamples(a);
  const alongX = new InverseDft(a.encodedSamples, a.firstSample, a.matrix.x);
  const alongY = new InverseDft(a.matrix.y, a.firstLine, a.matrix.y);
  const column = new Float64Array(2 * readouts.length);
  for (let coil = 0; coil < a.coils; coil++) {
    const rows = readouts.map((readout) => {
      const samplesOfCoil = readout.subarray(2 * coil * samples, 2 * (coil + 1) * samples);
      return alongX.run(reversed ? backward(samplesOfCoil) : samplesOfCoil);
    });
    for (let x = 0; x < a.matrix.x; x++) {
      for (const [line, row] of rows.entries()) {
        column[2 * line] = row[2 * x]!;
        column[2 * line + 1] = row[2 * x + 1]!;
      }
      const values = alongY.run(column);
      for (let y = 0; y < a.matrix.y; y++)
        frame.set(values.subarray(2 * y, 2 * y + 2), 2 * ((coil * a.matrix.y + y) * a.matrix.x + x));
    }
  }
}

/** `N^-1/2 sum_k s[k] exp(+i 2 pi (k - c)(x - c) / N)`, c = floor(N/2), as a plain sum. */
class InverseDft {
  readonly #length: number;
  readonly #first: number;
  readonly #kept: number;
  /** exp(i 2 pi m / N) / sqrt(N), interleaved. */
  readonly #turns: Float64Array;

  /**
   * @param length encoded samples N
   * @param first  encoded index of the first given sample; those before it are zero
   * @param kept   pixels kept about the centre
   */
  constructor(length: number, first: number, kept: number) {
    this.#length = length;
    this.#first = first;
    this.#kept = kept;
    this.#turns = new Float64Array(2 * length);
    for (let m = 0; m < length; m++) {
      this.#turns[2 * m] = Math.cos((2 * Math.PI * m) / length) / Math.sqrt(length);
      this.#turns[2 * m + 1] = Math.sin((2 * Math.PI * m) / length) / Math.sqrt(length);
    }
  }

  run(values: Float64Array): Float64Array {
    const result = new Float64Array(2 * this.#kept);
    const turns = this.#turns;
    const length = this.#length;
    const center = Math.floor(length / 2);
    for (let pixel = 0; pixel < this.#kept; pixel++) {
      const x = cropStart(length, this.#kept) + pixel - center;
      const step = (x + length) % length;
      let m = ((((this.#first - center) * x) % length) + length) % length; // (k - c)(x - c) modulo N
      let re = 0;
      let im = 0;
      for (let i = 0; i < values.length; i += 2) {
        const c = turns[2 * m]!;
        const s = turns[2 * m + 1]!;
        re += values[i]! * c - values[i + 1]! * s;
        im += values[i]! * s + values[i + 1]! * c;
        m += step;
        if (m >= length) m -= length;
      }
      result[2 * pixel] = re;
      result[2 * pixel + 1] = im;
    }
    return result;
  }
}

function backward(row: Float64Array): Float64Array {
  const result = new Float64Array(row.length);
  for (let i = 0; i < row.length; i += 2) result.set(row.subarray(i, i + 2), row.length - 2 - i);
  return result;
}

function rootSumOfSquares(images: Float64Array, frames: number, coils: number): Float64Array {
  const pixels = images.length / (2 * frames * coils);
  const result = new Float64Array(frames * pixels);
  for (let frame = 0; frame < frames; frame++) {
    for (let pixel = 0; pixel < pixels; pixel++) {
      let sum = 0;
      for (let coil = 0; coil < coils; coil++) {
        const at = 2 * ((frame * coils + coil) * pixels + pixel);
        sum += images[at]! ** 2 + images[at + 1]! ** 2;
      }
      result[frame * pixels + pixel] = Math.sqrt(sum);
    }
  }
  return result;
}
