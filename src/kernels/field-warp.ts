import { stretchFactors } from "./displacement.js";
import type { EchoTiming } from "./fat-water-model.js";
import { gatherLines, planRowWarp, type RowWarp, scatterRows } from "./row-warp.js";
import type { TransformEngine } from "./transform.js";

/** A signal that has decayed further than this in energy is not raised to its full level again: it would be noise. */
const LEAST_ENERGY = 1 / 16;

/**
 * What a field (and a decay) does to an object on its way into each echo, and how to undo it: the signal of pixel x gets
 * the phase `-2 pi f(x) TE` and the decay `exp(-R2*(x) TE)`, and is seen at `x + f(x) / bandwidth`.
 * Decay within a readout is left out.
 */
export class FieldWarp {
  /** Plans by bandwidth: echoes read alike share one. */
  readonly #warps = new Map<number, RowWarp>();
  readonly #stretches = new Map<number, Float32Array>();
  /** `exp(-i 2 pi f TE - R2* TE)`, interleaved, for each echo. */
  readonly #factors: Float32Array[];
  readonly #work: Float32Array;

  /**
   * @param fieldHz object's coordinates, [rows, length]
   * @param decayPerSecond R2*, [rows, length]; none if left out
   */
  constructor(
    private readonly engine: TransformEngine,
    private readonly timing: EchoTiming,
    private readonly rows: number,
    fieldHz: Float32Array,
    decayPerSecond?: Float32Array,
  ) {
    const length = fieldHz.length / rows;
    const centre = Math.floor(length / 2);
    for (const bandwidthHz of new Set(timing.pixelBandwidthHz)) {
      const shift = fieldHz.map((hz) => hz / bandwidthHz);
      this.#stretches.set(bandwidthHz, stretchFactors(shift, rows, length));
      for (let i = 0; i < shift.length; i++) shift[i]! += (i % length) - centre;
      this.#warps.set(bandwidthHz, planRowWarp(shift, rows, length));
    }
    this.#factors = timing.echoSeconds.map((seconds) => echoFactors(fieldHz, seconds, decayPerSecond));
    this.#work = new Float32Array(2 * fieldHz.length);
  }

  /**
   * k-space rows of one species in an echo, before its own chemical shift.
   * @param image  interleaved complex64, [rows, length]
   * @param lines  overwritten
   */
  toLines(echo: number, image: Float32Array, lines: Float32Array): void {
    const factors = this.#factors[echo]!;
    const work = this.#work;
    for (let i = 0; i < image.length; i += 2) {
      const re = image[i]!;
      const im = image[i + 1]!;
      const c = factors[i]!;
      const s = factors[i + 1]!;
      work[i] = re * c - im * s;
      work[i + 1] = re * s + im * c;
    }
    scatterRows(this.engine, this.#warp(echo), work, lines);
  }

  /**
   * The way back, nearly: every pixel read where it was seen, phase, decay and stretch taken off, and into k-space.
   * @param lines k-space rows of an echo, interleaved complex64, [rows, length]; overwritten by the result
   */
  straighten(echo: number, lines: Float32Array): void {
    const warp = this.#warp(echo);
    const work = this.#work;
    const factors = this.#factors[echo]!;
    const stretch = this.#stretches.get(this.timing.pixelBandwidthHz[echo]!)!;
    gatherLines(this.engine, warp, lines, work);
    for (let i = 0, p = 0; i < work.length; i += 2, p++) {
      const re = work[i]!;
      const im = work[i + 1]!;
      const c = factors[i]!;
      const s = factors[i + 1]!;
      const gain = stretch[p]! / Math.max(c * c + s * s, LEAST_ENERGY);
      lines[i] = gain * (re * c + im * s);
      lines[i + 1] = gain * (im * c - re * s);
    }
    const job = { source: lines, target: lines, outer: this.rows, inner: 1, length: warp.inputLength };
    this.engine.transformAxis({ ...job, inverse: false });
  }

  #warp(echo: number): RowWarp {
    return this.#warps.get(this.timing.pixelBandwidthHz[echo]!)!;
  }
}

function echoFactors(
  fieldHz: Float32Array,
  seconds: number,
  decayPerSecond: Float32Array | undefined,
): Float32Array {
  const out = new Float32Array(2 * fieldHz.length);
  for (let i = 0; i < fieldHz.length; i++) {
    const angle = -2 * Math.PI * fieldHz[i]! * seconds;
    const size = decayPerSecond ? Math.exp(-decayPerSecond[i]! * seconds) : 1;
    out[2 * i] = size * Math.cos(angle);
    out[2 * i + 1] = size * Math.sin(angle);
  }
  return out;
}
