import { cubicAt } from "./displacement.js";
import { between, fillUnknown } from "./fill.js";
import { smoothMap } from "./smooth.js";
import type { VolumeSize } from "./unwrap.js";

/** Below this share of the smoothing window on measured pixels a value is taken from further away instead. */
const LEAST_COVERAGE = 0.2;

export interface SmoothField {
  /** Defined everywhere, [rows, columns]. */
  readonly fieldHz: Float32Array;
  /** Hz, [rows, columns]; outside the measured region that of the nearest measured surroundings. */
  readonly standardErrorHz: Float32Array;
}

/**
 * Smooth a measured field (smooth.ts) and extend it over the whole grid (fill.ts).
 * @param fieldHz [rows, columns]
 * @param weights 1 / Hz^2, inverse variances, [rows, columns]; 0 where not measured
 * @param withErrors whether the standard errors are wanted; else they are 0
 * @param sigmaPixels 0 keeps the measured pixels as they are and only extends them
 */
export function smoothField(
  fieldHz: Float32Array,
  weights: Float32Array,
  rows: number,
  columns: number,
  sigmaPixels: number,
  withErrors = true,
): SmoothField {
  if (sigmaPixels === 0)
    return extended(
      fieldHz,
      weights.map((weight) => 1 / Math.sqrt(weight)),
      weights,
      rows,
      columns,
    );
  // A window two pixels wide or more leaves nothing between every second pixel that a cubic would miss.
  const step = sigmaPixels >= 1.5 ? 2 : 1;
  const { values, standardErrors, coverage } = smoothMap(
    fieldHz,
    weights,
    rows,
    columns,
    sigmaPixels,
    withErrors,
    step,
  );
  const [coarseRows, coarseColumns] = [Math.ceil(rows / step), Math.ceil(columns / step)];
  const known = coverage.map((share) => (share >= LEAST_COVERAGE ? 1 : 0));
  keepInRange(values, fieldHz, weights);
  if (!withErrors) standardErrors.fill(0);
  const coarse = extended(values, standardErrors, known, coarseRows, coarseColumns);
  if (step === 1) return coarse;
  const standardErrorHz = new Float32Array(rows * columns);
  for (let y = 0, i = 0; withErrors && y < rows; y++) {
    for (let x = 0; x < columns; x++, i++) {
      standardErrorHz[i] = between(coarse.standardErrorHz, coarseRows, coarseColumns, y / step, x / step);
    }
  }
  return {
    fieldHz: refined(coarse.fieldHz, coarseRows, coarseColumns, rows, columns, step),
    standardErrorHz,
  };
}

/** How far values beyond the measured pixels may lie beyond theirs, as a share of their range: room for a slope at the rim. */
const RANGE_ROOM = 0.1;

/** Beyond the measured pixels a curved surface runs away: hold it to about the range that was measured. */
function keepInRange(values: Float32Array, measured: Float32Array, weights: Float32Array): void {
  let [low, high] = [Number.POSITIVE_INFINITY, Number.NEGATIVE_INFINITY];
  for (let i = 0; i < measured.length; i++) {
    if (!(weights[i]! > 0)) continue;
    low = Math.min(low, measured[i]!);
    high = Math.max(high, measured[i]!);
  }
  const room = RANGE_ROOM * (high - low);
  for (let i = 0; i < values.length; i++) values[i] = Math.min(high + room, Math.max(low - room, values[i]!));
}

/** smoothField for every slice of a volume, [slices, rows, columns]. */
export function smoothSlices(
  fieldHz: Float32Array,
  weights: Float32Array,
  grid: VolumeSize,
  sigmaPixels: number,
  withErrors = true,
) {
  const { slices, rows, columns } = grid;
  const out = {
    fieldHz: new Float32Array(fieldHz.length),
    standardErrorHz: new Float32Array(fieldHz.length),
  };
  for (let z = 0; z < slices; z++) {
    const slice = [z * rows * columns, (z + 1) * rows * columns] as const;
    const smooth = smoothField(
      fieldHz.subarray(...slice),
      weights.subarray(...slice),
      rows,
      columns,
      sigmaPixels,
      withErrors,
    );
    out.fieldHz.set(smooth.fieldHz, slice[0]);
    out.standardErrorHz.set(smooth.standardErrorHz, slice[0]);
  }
  return out;
}

function extended(
  fieldHz: Float32Array,
  errorsHz: Float32Array,
  known: Float32Array,
  rows: number,
  columns: number,
): SmoothField {
  const out = { fieldHz: fieldHz.slice(), standardErrorHz: errorsHz.slice() };
  fillUnknown(out.fieldHz, known, rows, columns);
  fillUnknown(out.standardErrorHz, known, rows, columns);
  return out;
}

/** Cubic interpolation of a map of every `step`-th pixel to all pixels. */
function refined(
  coarse: Float32Array,
  coarseRows: number,
  coarseColumns: number,
  rows: number,
  columns: number,
  step: number,
): Float32Array {
  const wide = new Float32Array(coarseRows * columns);
  const line = new Float64Array(coarseColumns + 1);
  for (let y = 0; y < coarseRows; y++) {
    for (let x = 0; x < coarseColumns; x++) line[x] = coarse[y * coarseColumns + x]!;
    continued(line);
    for (let x = 0; x < columns; x++) wide[y * columns + x] = cubicAt(line, x / step);
  }
  const out = new Float32Array(rows * columns);
  const column = new Float64Array(coarseRows + 1);
  for (let x = 0; x < columns; x++) {
    for (let y = 0; y < coarseRows; y++) column[y] = wide[y * columns + x]!;
    continued(column);
    for (let y = 0; y < rows; y++) out[y * columns + x] = cubicAt(column, y / step);
  }
  return out;
}

/** The last entry by straight continuation of those before it. */
function continued(line: Float64Array): void {
  const last = line.length - 1;
  line[last] = last > 1 ? 2 * line[last - 1]! - line[last - 2]! : line[0]!;
}
