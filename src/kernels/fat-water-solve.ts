import { type EchoPhase, echoPhaseStep, turnEcho } from "./echo-phase.js";
import type { FatWaterModel } from "./fat-water-model.js";
import { type FieldStep, gaussNewtonStep, type Species, toImage } from "./fat-water-steps.js";
import { FieldWarp } from "./field-warp.js";
import { fillUnknown } from "./fill.js";
import { signalMask } from "./signal-mask.js";
import { smoothMap } from "./smooth.js";
import { smoothField } from "./smooth-field.js";
import type { TransformEngine } from "./transform.js";

/**
 * Water and fat at their true places from combined echoes and a first field map: straighten the echoes by the field,
 * solve each k, and repeat on what the exact model of the echoes (field-warp.ts, fat-water-model.ts) leaves unexplained,
 * since straightening takes the field where fat is seen for the field where it is. Between rounds the field follows the
 * part of that remainder which water and fat cannot explain (one Gauss-Newton step, weighted, smoothed).
 *
 * Source: Reeder et al. 2004, Magn Reson Med 51:35, doi:10.1002/mrm.10675 (Gauss-Newton steps of the field); sampling
 * times: Brodsky et al. 2008, Magn Reson Med 59:1151, doi:10.1002/mrm.21580; R2* as the field's imaginary part: Yu et
 * al. 2007, J Magn Reson Imaging 26:1153, doi:10.1002/jmri.21090; R2* common to water and fat: Yu et al. 2008.
 */
export interface FatWaterOptions {
  /** Rounds of solving: 3, with R2* 5, with an echo phase 6. One alone leaves some percent where the field is steep. */
  readonly rounds: number;
  /** Whether the field is refined after every round but the last; needs three echoes. */
  readonly refineField: boolean;
  /** Standard deviation of the window that smooths the refined field, pixels. */
  readonly smoothingPixels: number;
  /** Of the real (and the imaginary) part of the combined echoes. */
  readonly noiseDeviation: number;
  /** Fit one R2* per pixel for both species too; needs three echoes, says something with more. */
  readonly fitDecay: boolean;
  /** Fit an odd/even phase between echoes read forward and backward (echo-phase.ts); needs three echoes. */
  readonly fitEchoPhase: boolean;
  /** Whether the echoes' magnitudes without displacement are wanted, for a fit of magnitudes (magnitude-fit.ts). */
  readonly keepEchoes: boolean;
}

/** All [rows, length]; complex ones interleaved. Water and fat have the phase of time zero. */
export interface FatWaterImages {
  readonly water: Float32Array;
  readonly fat: Float32Array;
  readonly fieldHz: Float32Array;
  /** Hz, from noise alone; present where the field was refined. */
  readonly standardErrorHz?: Float32Array;
  /** 1 / s; present where it was fitted. */
  readonly decayPerSecond?: Float32Array;
  /** Root of the sum over the echoes of the squared magnitude that the fit leaves, unit of the images. */
  readonly residual: Float32Array;
  /** What was taken off echoes read forward, and put on those read backward; zero where not fitted. */
  readonly echoPhase: EchoPhase;
  /** One for each echo, real, where asked for. */
  readonly echoMagnitudes?: readonly Float32Array[];
}

/** Signal below this share of the bright level does not steer the field. */
const SIGNAL_SHARE = 0.05;
const MOST_DECAY_PER_SECOND = 1000;
const DECAY_SMOOTHING_PIXELS = 1;

/** @param lines k-space along x of the combined echoes, interleaved complex64, [rows, length] each; not modified */
export function separateFatWater(
  engine: TransformEngine,
  lines: readonly Float32Array[],
  model: FatWaterModel,
  rows: number,
  startHz: Float32Array,
  options: FatWaterOptions,
): FatWaterImages {
  const floats = 2 * rows * model.length;
  const data = options.fitEchoPhase ? lines.map((line) => line.slice()) : lines;
  const rest = lines.map(() => engine.allocate(floats, false));
  const spectra = { water: engine.allocate(floats), fat: engine.allocate(floats) };
  const images = { water: engine.allocate(floats, false), fat: engine.allocate(floats, false) };
  const state: State = { fieldHz: startHz.slice(), echoPhase: { radians: 0, radiansPerPixel: 0 } };
  if (options.fitDecay) state.decayPerSecond = new Float32Array(startHz.length);
  let warp = new FieldWarp(engine, model.timing, rows, state.fieldHz, state.decayPerSecond);
  for (let round = 0; round < options.rounds; round++) {
    const last = round + 1 === options.rounds;
    for (const [e, line] of data.entries()) {
      rest[e]!.set(line);
      if (round > 0) subtractModel(engine, warp, e, images, model, rest[e]!);
      warp.straighten(e, rest[e]!);
    }
    if (last) addLastSolution(rest, model, rows, spectra);
    else addSolution(rest, model, rows, spectra);
    for (const species of ["water", "fat"] as const)
      toImage(engine, spectra[species], images[species], rows, model.length);
    const stepIndex = round - firstStep(options);
    if (last || model.echoes < 3 || stepIndex < 0) continue;
    if (refine(engine, { rest, spectra, images, data, model, rows, options }, state, stepIndex)) {
      warp = new FieldWarp(engine, model.timing, rows, state.fieldHz, state.decayPerSecond);
    }
  }
  for (const line of rest) toImage(engine, line, line, rows, model.length);
  const out = { water: images.water.slice(), fat: images.fat.slice(), ...state };
  const residual = rootSumOfSquares(rest);
  const echoMagnitudes = options.keepEchoes ? straightMagnitudes(out, rest, model) : undefined;
  for (const array of [...rest, spectra.water, spectra.fat, images.water, images.fat]) engine.release(array);
  return { ...out, residual, ...(echoMagnitudes && { echoMagnitudes }) };
}

/** What is fitted beside water and fat. */
interface State {
  fieldHz: Float32Array;
  standardErrorHz?: Float32Array;
  decayPerSecond?: Float32Array;
  echoPhase: EchoPhase;
}

interface Work {
  /** Straightened remainder of each echo, k-space along x. */
  readonly rest: readonly Float32Array[];
  readonly spectra: Species;
  readonly images: Species;
  /** The echoes themselves, the echo phase taken off. */
  readonly data: readonly Float32Array[];
  readonly model: FatWaterModel;
  readonly rows: number;
  readonly options: FatWaterOptions;
}

/** The first round's remainder still holds what straightening did to fat; with rounds to spare, nothing is fitted to it. */
function firstStep(options: FatWaterOptions): number {
  return options.rounds > 2 ? 1 : 0;
}

/** Steps of field and decay: a few suffice, and each adds a little of the noise that the smoothing leaves. */
function mostFieldSteps(options: FatWaterOptions): number {
  const most = options.fitDecay || options.fitEchoPhase ? 4 : 2;
  return Math.min(most, options.rounds - 1 - firstStep(options));
}

/** One step of all that is fitted beside water and fat. @returns whether field or decay have changed */
function refine(engine: TransformEngine, work: Work, state: State, stepIndex: number): boolean {
  const { rest, spectra, images, data, model, rows, options } = work;
  const mask = signalMask([images.water, images.fat], SIGNAL_SHARE);
  if (options.fitEchoPhase) {
    const change = echoPhaseStep(engine, rest, spectra, model, rows, mask);
    state.echoPhase = {
      radians: state.echoPhase.radians + change.radians,
      radiansPerPixel: state.echoPhase.radiansPerPixel + change.radiansPerPixel,
    };
    for (const [e, line] of data.entries()) {
      turnEcho(engine, line, rows, change, Math.sign(model.timing.pixelBandwidthHz[e]!));
    }
  }
  const fieldSteps = mostFieldSteps(options);
  if ((!options.refineField && !state.decayPerSecond) || stepIndex >= fieldSteps) return false;
  const step = gaussNewtonStep(engine, rest, spectra, model, rows);
  if (state.decayPerSecond) state.decayPerSecond = steppedDecay(state.decayPerSecond, step, mask, rows);
  if (options.refineField) {
    const withErrors = stepIndex + 1 === fieldSteps; // only the last step's are kept
    Object.assign(state, steppedField(state.fieldHz, step, mask, rows, options, withErrors));
  }
  return true;
}

/** Magnitudes of the echoes as they would be without displacement, phases of the field, and noise apart: [rows, length] each. */
function straightMagnitudes(
  fit: { water: Float32Array; fat: Float32Array; decayPerSecond?: Float32Array },
  rest: readonly Float32Array[],
  model: FatWaterModel,
): Float32Array[] {
  return rest.map((left, e) => {
    const seconds = model.timing.echoSeconds[e]!;
    const middle = 2 * (e * model.length + Math.floor(model.length / 2)); // k = 0 is the echo time
    const c = model.fat[middle]!;
    const s = model.fat[middle + 1]!;
    const out = new Float32Array(left.length / 2);
    for (let p = 0, i = 0; p < out.length; p++, i += 2) {
      const re = fit.water[i]! + c * fit.fat[i]! - s * fit.fat[i + 1]! + left[i]!;
      const im = fit.water[i + 1]! + c * fit.fat[i + 1]! + s * fit.fat[i]! + left[i + 1]!;
      out[p] = Math.hypot(re, im) * Math.exp(-seconds * (fit.decayPerSecond?.[p] ?? 0));
    }
    return out;
  });
}

function subtractModel(
  engine: TransformEngine,
  warp: FieldWarp,
  echo: number,
  images: Species,
  model: FatWaterModel,
  rest: Float32Array,
): void {
  const { length, fat } = model;
  const lines = engine.allocate(rest.length, false);
  warp.toLines(echo, images.water, lines);
  for (let i = 0; i < rest.length; i++) rest[i]! -= lines[i]!;
  warp.toLines(echo, images.fat, lines);
  for (let i = 0; i < rest.length; ) {
    for (let k = 2 * echo * length; k < 2 * (echo + 1) * length; k += 2, i += 2) {
      const re = lines[i]!;
      const im = lines[i + 1]!;
      const c = fat[k]!;
      const s = fat[k + 1]!;
      rest[i]! -= re * c - im * s;
      rest[i + 1]! -= re * s + im * c;
    }
  }
  engine.release(lines);
}

/** Add the least squares solution at each k of what is left. */
function addSolution(
  rest: readonly Float32Array[],
  model: FatWaterModel,
  rows: number,
  spectra: Species,
): void {
  const { echoes, length, inverse } = model;
  for (const [species, target] of [spectra.water, spectra.fat].entries()) {
    for (let e = 0; e < echoes; e++) {
      const source = rest[e]!;
      for (let y = 0, i = 0; y < rows; y++) {
        for (let k = 0, at = 2 * (species * echoes + e); k < length; k++, i += 2, at += 4 * echoes) {
          const re = source[i]!;
          const im = source[i + 1]!;
          const c = inverse[at]!;
          const s = inverse[at + 1]!;
          target[i]! += re * c - im * s;
          target[i + 1]! += re * s + im * c;
        }
      }
    }
  }
}

/** addSolution, and take what it explains off the remainder. */
function addLastSolution(
  rest: readonly Float32Array[],
  model: FatWaterModel,
  rows: number,
  spectra: Species,
): void {
  const correction = {
    water: new Float32Array(spectra.water.length),
    fat: new Float32Array(spectra.fat.length),
  };
  addSolution(rest, model, rows, correction);
  removeExplained(rest, correction, model, rows);
  for (let i = 0; i < correction.water.length; i++) {
    spectra.water[i]! += correction.water[i]!;
    spectra.fat[i]! += correction.fat[i]!;
  }
}

/** Take off the straightened remainder what the last correction explains. */
function removeExplained(
  rest: readonly Float32Array[],
  correction: Species,
  model: FatWaterModel,
  rows: number,
): void {
  const { length, fat } = model;
  const { water, fat: oil } = correction;
  for (const [e, target] of rest.entries()) {
    for (let y = 0, i = 0; y < rows; y++) {
      for (let k = 2 * e * length; k < 2 * (e + 1) * length; k += 2, i += 2) {
        const re = oil[i]!;
        const im = oil[i + 1]!;
        const c = fat[k]!;
        const s = fat[k + 1]!;
        target[i]! -= water[i]! + re * c - im * s;
        target[i + 1]! -= water[i + 1]! + re * s + im * c;
      }
    }
  }
}

function steppedField(
  fieldHz: Float32Array,
  step: FieldStep,
  mask: Uint8Array,
  rows: number,
  options: FatWaterOptions,
  withErrors: boolean,
): { fieldHz: Float32Array; standardErrorHz: Float32Array } {
  const { noiseDeviation, smoothingPixels } = options;
  const weights = step.weights.map((weight, i) => (mask[i] ? weight / noiseDeviation ** 2 : 0));
  const total = fieldHz.map((hz, i) => hz + (mask[i] ? step.stepHz[2 * i]! : 0));
  return smoothField(total, weights, rows, fieldHz.length / rows, smoothingPixels, withErrors);
}

/** The decay is smoothed a little, by its weights: a pixel of noise with a large one would swamp its row. */
function steppedDecay(decay: Float32Array, step: FieldStep, mask: Uint8Array, rows: number): Float32Array {
  const weights = step.weights.map((weight, i) => (mask[i] ? weight : 0));
  const total = decay.map((rate, i) => rate - 2 * Math.PI * step.stepHz[2 * i + 1]!);
  const { values } = smoothMap(total, weights, rows, decay.length / rows, DECAY_SMOOTHING_PIXELS, false);
  for (let i = 0; i < values.length; i++)
    values[i] = Math.min(MOST_DECAY_PER_SECOND, Math.max(0, values[i]!));
  fillUnknown(values, mask, rows, decay.length / rows); // no jump at the edge
  return values;
}

/** Over the echoes, interleaved complex images. */
function rootSumOfSquares(images: readonly Float32Array[]): Float32Array {
  const out = new Float32Array(images[0]!.length / 2);
  for (const image of images) {
    for (let p = 0, i = 0; p < out.length; p++, i += 2)
      out[p]! += image[i]! * image[i]! + image[i + 1]! * image[i + 1]!;
  }
  return out.map(Math.sqrt);
}
