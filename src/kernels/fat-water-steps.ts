import type { FatWaterModel } from "./fat-water-model.js";
import type { TransformEngine } from "./transform.js";

/** k-space along x (or images) of both species, interleaved complex64, [rows, length]. */
export interface Species {
  readonly water: Float32Array;
  readonly fat: Float32Array;
}

export interface FieldStep {
  /** Hz for each pixel, interleaved: real part field, imaginary part decay / (-2 pi). */
  readonly stepHz: Float32Array;
  /** 1 / Hz^2, inverse variance of each part for unit noise. */
  readonly weights: Float32Array;
}

/**
 * For each pixel the change of field that best explains what water and fat cannot: with the remainder r and its change
 * g per Hz, `-sum conj(g) r / sum |g|^2` over the triples of echoes.
 */
export function gaussNewtonStep(
  engine: TransformEngine,
  rest: readonly Float32Array[],
  spectra: Species,
  model: FatWaterModel,
  rows: number,
): FieldStep {
  const floats = spectra.water.length;
  const [r, g] = [engine.allocate(floats, false), engine.allocate(floats, false)];
  const stepHz = new Float32Array(floats);
  const weights = new Float32Array(floats / 2);
  for (let triple = 0; triple + 2 < model.echoes; triple++) {
    r.fill(0);
    g.fill(0);
    for (let j = 0; j < 3; j++) {
      addCancelled(rest[triple + j]!, model, triple, j, rows, r);
      addDerivative(spectra, model, triple, j, rows, g, (seconds) => 2 * Math.PI * seconds);
    }
    for (const array of [r, g]) toImage(engine, array, array, rows, model.length);
    for (let i = 0, p = 0; i < floats; i += 2, p++) {
      stepHz[i]! -= g[i]! * r[i]! + g[i + 1]! * r[i + 1]!;
      stepHz[i + 1]! -= g[i]! * r[i + 1]! - g[i + 1]! * r[i]!;
      weights[p]! += g[i]! ** 2 + g[i + 1]! ** 2;
    }
  }
  for (let p = 0; p < weights.length; p++) {
    const gain = weights[p]! > 0 ? 1 / weights[p]! : 0;
    stepHz[2 * p]! *= gain;
    stepHz[2 * p + 1]! *= gain;
  }
  engine.release(r);
  engine.release(g);
  return { stepHz, weights };
}

/** `target += n_j(k) rest(k)`. */
export function addCancelled(
  rest: Float32Array,
  model: FatWaterModel,
  triple: number,
  j: number,
  rows: number,
  target: Float32Array,
): void {
  const { length, residual } = model;
  for (let y = 0, i = 0; y < rows; y++) {
    for (let k = 0, at = 6 * triple * length + 2 * j; k < length; k++, i += 2, at += 6) {
      const re = rest[i]!;
      const im = rest[i + 1]!;
      const c = residual[at]!;
      const s = residual[at + 1]!;
      target[i]! += re * c - im * s;
      target[i + 1]! += re * s + im * c;
    }
  }
}

/** `target += n_j(k) i rate(tau) (W(k) + c(tau) F(k))`: the change of the echo for a phase that grows by `rate` per unit. */
export function addDerivative(
  spectra: Species,
  model: FatWaterModel,
  triple: number,
  j: number,
  rows: number,
  target: Float32Array,
  rate: (seconds: number) => number,
): void {
  const { length, residual, times, fat: signal } = model;
  const { water, fat } = spectra;
  const factors = new Float64Array(4 * length); // of water and of fat
  for (let k = 0; k < length; k++) {
    const at = 6 * (triple * length + k) + 2 * j;
    const sample = (triple + j) * length + k;
    const angle = rate(times[sample]!);
    const re = -angle * residual[at + 1]!;
    const im = angle * residual[at]!;
    const c = signal[2 * sample]!;
    const s = signal[2 * sample + 1]!;
    factors.set([re, im, re * c - im * s, re * s + im * c], 4 * k);
  }
  for (let y = 0, i = 0; y < rows; y++) {
    for (let k = 0; k < 4 * length; k += 4, i += 2) {
      const a = factors[k]!;
      const b = factors[k + 1]!;
      const c = factors[k + 2]!;
      const s = factors[k + 3]!;
      target[i]! += a * water[i]! - b * water[i + 1]! + c * fat[i]! - s * fat[i + 1]!;
      target[i + 1]! += a * water[i + 1]! + b * water[i]! + c * fat[i + 1]! + s * fat[i]!;
    }
  }
}

/** Rows of k-space to rows of the image. */
export function toImage(
  engine: TransformEngine,
  source: Float32Array,
  target: Float32Array,
  rows: number,
  length: number,
): void {
  engine.transformAxis({ source, target, outer: rows, inner: 1, length, inverse: true });
}
