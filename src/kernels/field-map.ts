import { foldedInAny, objectField } from "./displacement.js";
import { closestEchoes, fieldRangeHz } from "./echo-times.js";
import { coarseFatWaterField } from "./fat-water-field.js";
import { type FatWaterModel, fatSignal, type SpectralLine } from "./fat-water-model.js";
import { between } from "./fill.js";
import { type FatView, type PhaseLine, phaseLine } from "./phase-line.js";
import { gatherRows, planRowWarp } from "./row-warp.js";
import { smoothSlices } from "./smooth-field.js";
import type { TransformEngine } from "./transform.js";
import type { VolumeSize } from "./unwrap.js";

/**
 * Field map from two or more echoes: `-arg(I2 conj(I1)) / (2 pi dTE)` for a signal that turns as exp(-i 2 pi f t); over
 * more than two echoes the weighted least squares line through the phases; unwrapped, smoothed, extended, and in the
 * coordinates of the object.
 *
 * Source: Jezzard and Balaban 1995, Magn Reson Med 34:65, doi:10.1002/mrm.1910340111; weights and standard error: the
 * phase of a sample of magnitude A in noise of deviation s per part has the variance s^2 / A^2 (first order).
 */
export interface FieldMapOptions {
  /** Echo times, seconds since the off-resonance phase was zero, one for each echo, all different. */
  readonly echoSeconds: readonly number[];
  /** Hz per pixel along x, one for each echo; negative where the echo was read backwards; Infinity: not displaced. */
  readonly pixelBandwidthHz: readonly number[];
  /** Standard deviation of the noise in the real (and in the imaginary) part of the combined images. */
  readonly noiseDeviation: number;
  /** 1 where there is signal enough to measure, [slices, rows, columns], in the image's coordinates. */
  readonly mask: Uint8Array;
  /** Standard deviation of the smoothing window in pixels; 0 for none. */
  readonly smoothingPixels: number;
  /**
   * Water and fat in these echoes, three or more that tell them apart, of as many columns: pixels of fat are then left
   * out. Without it, fat counts as field.
   */
  readonly fat?: { readonly model: FatWaterModel; readonly asFieldHz: number };
}

/** All maps [slices, rows, columns] in the coordinates of the object. */
export interface FieldMap {
  /** Hz, defined everywhere. */
  readonly fieldHz: Float32Array;
  /** Hz; of the smoothed map, from noise alone. */
  readonly standardErrorHz: Float32Array;
  /** 1 where the field was measured (not extended) and the displacement does not fold. */
  readonly mask: Uint8Array;
  readonly foldedCount: number;
  /** Pixels with signal that is not of water alone, as far as the echoes show it, not in the mask; and the others. */
  readonly notWaterCount: number;
  readonly keptCount: number;
  /** Fields beyond this from their surroundings are ambiguous: 1 / (2 dTE) of the closest echoes. */
  readonly wrapLimitHz: number;
}

/** Rounds of undisplacing and measuring again where echoes are displaced in opposite directions; each gains a factor of 10 or more. */
const ROUNDS = 4;

/**
 * @param echoes channel-combined images, interleaved complex64, [slices, rows, columns] each; one set of channel weights
 * @throws RangeError when the numbers of echoes, times and bandwidths differ or two times are equal
 */
export function measureField(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  grid: VolumeSize,
  options: FieldMapOptions,
): FieldMap {
  const { echoSeconds, pixelBandwidthHz } = options;
  if (
    echoes.length < 2 ||
    echoSeconds.length !== echoes.length ||
    pixelBandwidthHz.length !== echoes.length
  ) {
    throw new RangeError(
      `${echoes.length} echoes, ${echoSeconds.length} times, ${pixelBandwidthHz.length} bandwidths`,
    );
  }
  const alike = pixelBandwidthHz.every((hz) => hz === pixelBandwidthHz[0]);
  const fat = options.fat && fatView(engine, echoes, grid, options.fat);
  return alike
    ? measureAlike(echoes, grid, options, fat)
    : measureOpposed(engine, echoes, grid, options, fat);
}

/** What fat counts as where it is taken for water, Hz: its offset, whole turns between the two closest echoes aside. */
export function fatAsFieldHz(echoSeconds: readonly number[], spectrum: readonly SpectralLine[]): number {
  const { first, second, gapSeconds } = closestEchoes(echoSeconds);
  const [a, b] = fatSignal(spectrum, echoSeconds[first]!);
  const [c, d] = fatSignal(spectrum, echoSeconds[second]!);
  return -Math.atan2(d * a - c * b, c * a + d * b) / (2 * Math.PI * gapSeconds);
}

/** The field with fat allowed for, slice by slice. */
function fatView(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  { slices, rows, columns }: VolumeSize,
  { model, asFieldHz }: NonNullable<FieldMapOptions["fat"]>,
): FatView {
  const { echoSeconds, pixelBandwidthHz } = model.timing;
  const rangeHz = fieldRangeHz(echoSeconds, pixelBandwidthHz);
  const fieldHz = new Float32Array(slices * rows * columns);
  for (let slice = 0; slice < slices; slice++) {
    const lines = echoes.map((echo) => {
      const line = engine.allocate(2 * rows * columns, false);
      const source = echo.subarray(2 * slice * rows * columns, 2 * (slice + 1) * rows * columns);
      engine.transformAxis({ source, target: line, outer: rows, inner: 1, length: columns, inverse: false });
      return line;
    });
    const coarse = coarseFatWaterField(engine, lines, model, rows, rangeHz);
    fieldHz.set(coarse.fieldHz, slice * rows * columns);
    for (const line of lines) engine.release(line);
  }
  return { fieldHz, asFieldHz };
}

/** All echoes displaced alike: measure in the image, then carry the map to the object. */
function measureAlike(
  echoes: readonly Float32Array[],
  grid: VolumeSize,
  options: FieldMapOptions,
  fat: FatView | undefined,
): FieldMap {
  const { rows, columns, slices } = grid;
  const line = phaseLine(echoes, grid, { ...options, areAligned: true }, fat);
  const smooth = smoothSlices(line.fieldHz, line.weights, grid, options.smoothingPixels);
  const bandwidthHz = options.pixelBandwidthHz[0]!;
  const { fieldHz, places, folded } = objectField(smooth.fieldHz, slices * rows, columns, bandwidthHz);
  const standardErrorHz = new Float32Array(fieldHz.length);
  const measured = new Uint8Array(fieldHz.length);
  for (let i = 0; i < fieldHz.length; i++) {
    const row = Math.floor(i / columns) * columns;
    const errors = smooth.standardErrorHz.subarray(row, row + columns);
    standardErrorHz[i] = between(errors, 1, columns, 0, places[i]!);
    measured[i] = line.mask[row + Math.min(columns - 1, Math.max(0, Math.round(places[i]!)))]!;
  }
  return {
    ...settled(fieldHz, measured, grid, [bandwidthHz], folded),
    standardErrorHz,
    ...counts(options.mask, line.mask),
    wrapLimitHz: line.wrapLimitHz,
  };
}

/** Echoes displaced differently: put each back with the map so far, measure what is left, and again. */
function measureOpposed(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  grid: VolumeSize,
  options: FieldMapOptions,
  fat: FatView | undefined,
): FieldMap {
  let fieldHz: Float32Array = new Float32Array(options.mask.length);
  let standardErrorHz = fieldHz;
  let line: PhaseLine | undefined;
  for (let round = 0; round < ROUNDS; round++) {
    const straight = echoes.map((echo, e) =>
      demodulated(engine, echo, fieldHz, grid, options.pixelBandwidthHz[e]!, options.echoSeconds[e]!),
    );
    const rest = fat && { ...fat, fieldHz: fat.fieldHz.map((hz, i) => hz - fieldHz[i]!) };
    line = phaseLine(straight, grid, { ...options, areAligned: round >= ROUNDS - 2 }, rest);
    const total = line.fieldHz.map((hz, i) => hz + fieldHz[i]!);
    ({ fieldHz, standardErrorHz } = smoothSlices(total, line.weights, grid, options.smoothingPixels));
    if (round === 0) fieldHz = onRightTurn(engine, echoes, fieldHz, grid, options, 2 * line.wrapLimitHz);
  }
  const { mask, wrapLimitHz } = line!;
  return {
    ...settled(fieldHz, mask, grid, options.pixelBandwidthHz),
    standardErrorHz,
    ...counts(options.mask, mask),
    wrapLimitHz,
  };
}

/** How much better the echoes must lie on each other in another turn than the one nearest zero. */
const BETTER = 0.8;

/** The field in the turn in which echoes read in opposite directions lie on each other best. */
function onRightTurn(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  fieldHz: Float32Array,
  grid: VolumeSize,
  { pixelBandwidthHz, echoSeconds, mask }: FieldMapOptions,
  turnHz: number,
): Float32Array {
  let [best, least] = [fieldHz, Number.POSITIVE_INFINITY];
  for (const turns of [0, -1, 1]) {
    const field = fieldHz.map((hz) => hz + turns * turnHz);
    const straight = echoes.map((echo, e) =>
      demodulated(engine, echo, field, grid, pixelBandwidthHz[e]!, echoSeconds[e]!),
    );
    const unlike = unlikeness(straight, mask);
    if (unlike >= (turns === 0 ? Number.POSITIVE_INFINITY : BETTER * least)) continue;
    [best, least] = [field, unlike];
  }
  return best;
}

/** Sum of the squared differences of the echoes' magnitudes from their mean. */
function unlikeness(echoes: readonly Float32Array[], mask: Uint8Array): number {
  let sum = 0;
  for (let p = 0; p < mask.length; p++) {
    if (!mask[p]) continue;
    let [first, second] = [0, 0];
    for (const echo of echoes) {
      const square = echo[2 * p]! ** 2 + echo[2 * p + 1]! ** 2;
      first += Math.sqrt(square);
      second += square;
    }
    sum += second - (first * first) / echoes.length;
  }
  return sum;
}

/** Mask and count of a map in the object's coordinates. */
function settled(
  fieldHz: Float32Array,
  measured: Uint8Array,
  grid: VolumeSize,
  pixelBandwidthHz: readonly number[],
  foldedOrigins?: Uint8Array,
) {
  const folded = foldedInAny(fieldHz, pixelBandwidthHz, grid.slices * grid.rows, grid.columns);
  if (foldedOrigins) for (let i = 0; i < folded.length; i++) folded[i]! |= foldedOrigins[i]!;
  const mask = measured.map((flag, i) => flag & (1 - folded[i]!));
  return { fieldHz, mask, foldedCount: folded.reduce((sum, flag, i) => sum + (flag & measured[i]!), 0) };
}

function counts(all: Uint8Array, kept: Uint8Array) {
  const count = (mask: Uint8Array) => mask.reduce((sum, flag) => sum + flag, 0);
  const keptCount = count(kept);
  return { keptCount, notWaterCount: count(all) - keptCount };
}

/** An echo read where the field has put each pixel, its phase taken off. */
function demodulated(
  engine: TransformEngine,
  echo: Float32Array,
  fieldHz: Float32Array,
  { slices, rows, columns }: VolumeSize,
  pixelBandwidthHz: number,
  echoSeconds: number,
): Float32Array {
  const centre = Math.floor(columns / 2);
  const places = fieldHz.map((hz, i) => (i % columns) - centre + hz / pixelBandwidthHz);
  const out = new Float32Array(echo.length);
  gatherRows(engine, planRowWarp(places, slices * rows, columns), echo, out);
  for (let i = 0; i < fieldHz.length; i++) {
    const angle = 2 * Math.PI * fieldHz[i]! * echoSeconds;
    const re = out[2 * i]!;
    const im = out[2 * i + 1]!;
    const c = Math.cos(angle);
    const s = Math.sin(angle);
    out[2 * i] = re * c - im * s;
    out[2 * i + 1] = re * s + im * c;
  }
  return out;
}
