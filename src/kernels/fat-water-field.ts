import { cubicAt } from "./displacement.js";
import { closestEchoes } from "./echo-times.js";
import type { FatWaterModel } from "./fat-water-model.js";
import { minimizeLabels } from "./label-graph.js";
import { smoothField } from "./smooth-field.js";
import type { TransformEngine } from "./transform.js";

/**
 * A first field map from echoes that hold water and fat, without swaps.
 *
 * For each of a row of candidate fields the echoes are demodulated by it, which also undoes its displacement; what water
 * and fat then cannot explain at each k is a residual image. Its energy over blocks of pixels is the cost of the
 * candidate there. A pixel of one species has two good candidates, about the main fat offset apart; labels are chosen
 * for all blocks together by message passing on the graph of blocks (label-graph.ts), so that pixels of one species
 * follow those that hold both, over the field's smoothness: changing the field by h Hz between blocks, beside the mean
 * slope over the image (which the steps of phase from block to block show, whatever the species), costs
 * `h / PRICE_HZ` of the weaker block's energy. Where nothing at all decides (one species only, isolated), the shape of
 * the fat spectrum does, and last the field nearest zero.
 *
 * Source: cost per candidate field: Hernando, Kellman, Haldar, Liang 2010, Magn Reson Med 63:79, doi:10.1002/mrm.22177
 * (variable projection and graph method); here with exact sampling times and on blocks.
 */
const BLOCK = 4; // coarse pixels
const MOST_COARSE = 128; // pixels of an axis that the costs are computed on
/** Candidates per turn between the first and the last echo. */
const STEPS = 16;
const MOST_LABELS = 128;
/** The mean slope is followed so many ranges away from zero. */
const MOST_REACHES = 2;
const PRICE_HZ = 400;
/** Cost of 100 Hz off zero, as a share of a block's energy. */
const ZERO_PULL = 1e-4;
const ROUNDS = 4;

/** Lengths that are transformed to find the first field of rows of so many pixels. */
export function coarseFieldLengths(length: number): number[] {
  return [length, Math.min(length, MOST_COARSE)];
}

export interface CoarseField {
  /** Hz, object's coordinates, [rows, length]. */
  readonly fieldHz: Float32Array;
  /** Share of the signal's energy that water and fat leave unexplained. */
  readonly unexplained: number;
}

/** What the costs are computed on: every `rowStep`-th row, the middle `columns` samples of k-space. */
interface CoarseGrid {
  readonly rowStep: number;
  readonly rows: number;
  readonly columns: number;
  readonly blockRows: number;
  readonly blockColumns: number;
}

/**
 * @param lines k-space along x of the combined echoes, interleaved complex64, [rows, length] each, k ascending
 * @param rangeHz fields within it of the mean slope are considered; beyond 1 / (2 dTE) of equally spaced echoes they repeat
 * @throws RangeError for fewer than three echoes
 */
export function coarseFatWaterField(
  engine: TransformEngine,
  lines: readonly Float32Array[],
  model: FatWaterModel,
  rows: number,
  rangeHz: number,
): CoarseField {
  if (model.echoes < 3) throw new RangeError(`${model.echoes} echoes; a joint field needs 3 or more`);
  const { echoSeconds } = model.timing;
  const spanSeconds = Math.max(...echoSeconds) - Math.min(...echoSeconds);
  const stepHz = Math.max(1 / (STEPS * spanSeconds), (2 * rangeHz) / MOST_LABELS);
  const grid = coarseGrid(rows, model.length);
  const { energy, pairs } = blockEnergies(engine, lines, model, grid);
  const perRadian = -1 / (2 * Math.PI * closestEchoes(echoSeconds).gapSeconds * stepHz);
  const expected = expectedLabels(pairs, energy, grid, perRadian);
  const reach = Math.ceil(rangeHz / stepHz);
  // Costs for all fields that are within reach of what is expected somewhere.
  const most = expected.reduce((high, label) => Math.max(high, Math.abs(label)), 0);
  const labels = 2 * (reach + Math.min(MOST_REACHES * reach, Math.ceil(most))) + 1;
  const costs = candidateCosts(engine, lines, model, grid, labels, stepHz);
  const chosen = chooseLabels(costs, energy, grid, { labels, reach, expected }, stepHz);
  const { fieldHz, weights, left } = refineLabels(costs, chosen, labels, stepHz);
  const smooth = smoothField(fieldHz, weights, grid.blockRows, grid.blockColumns, 1, false).fieldHz;
  const total = energy.reduce((sum, value) => sum + value, 0);
  return { fieldHz: toPixels(smooth, grid, rows, model.length), unexplained: total > 0 ? left / total : 0 };
}

function coarseGrid(rows: number, length: number): CoarseGrid {
  const rowStep = Math.ceil(rows / MOST_COARSE);
  const coarseRows = Math.ceil(rows / rowStep);
  const columns = Math.min(length, MOST_COARSE);
  const [blockRows, blockColumns] = [Math.ceil(coarseRows / BLOCK), Math.ceil(columns / BLOCK)];
  return { rowStep, rows: coarseRows, columns, blockRows, blockColumns };
}

/** Residual energy of each candidate over blocks, [blockRows, blockColumns, labels]. */
function candidateCosts(
  engine: TransformEngine,
  lines: readonly Float32Array[],
  model: FatWaterModel,
  grid: CoarseGrid,
  labels: number,
  stepHz: number,
): Float32Array {
  const { columns } = grid;
  const out = new Float32Array(grid.blockRows * grid.blockColumns * labels);
  const image = engine.allocate(2 * grid.rows * columns, false);
  const weights = new Float32Array(2 * 3 * columns);
  for (let triple = 0; triple + 2 < model.echoes; triple++) {
    for (let label = 0; label < labels; label++) {
      const fieldHz = (label - (labels - 1) / 2) * stepHz;
      demodulatedWeights(model, triple, fieldHz, columns, weights);
      cancelledLines(lines, model, grid, triple, weights, image);
      transformRows(engine, image, grid);
      addBlockEnergies(image, grid, out, label, labels);
    }
  }
  engine.release(image);
  return out;
}

/** The residual combination of a triple, each sample demodulated by a field, over the middle of k-space: [3, columns]. */
function demodulatedWeights(
  model: FatWaterModel,
  triple: number,
  fieldHz: number,
  columns: number,
  weights: Float32Array,
): void {
  const { length, times, residual } = model;
  const first = Math.floor(length / 2) - Math.floor(columns / 2);
  for (let j = 0; j < 3; j++) {
    for (let k = 0; k < columns; k++) {
      const angle = 2 * Math.PI * fieldHz * times[(triple + j) * length + first + k]!;
      const at = 6 * (triple * length + first + k) + 2 * j;
      const re = residual[at]!;
      const im = residual[at + 1]!;
      const c = Math.cos(angle);
      const s = Math.sin(angle);
      weights[2 * (j * columns + k)] = re * c - im * s;
      weights[2 * (j * columns + k) + 1] = re * s + im * c;
    }
  }
}

function cancelledLines(
  lines: readonly Float32Array[],
  model: FatWaterModel,
  grid: CoarseGrid,
  triple: number,
  weights: Float32Array,
  target: Float32Array,
): void {
  const { rows, columns, rowStep } = grid;
  const first = Math.floor(model.length / 2) - Math.floor(columns / 2);
  const [a, b, c] = [lines[triple]!, lines[triple + 1]!, lines[triple + 2]!];
  for (let y = 0, to = 0; y < rows; y++) {
    let from = 2 * (y * rowStep * model.length + first);
    for (let i = 0; i < 2 * columns; i += 2, from += 2, to += 2) {
      const j = i + 2 * columns;
      const l = i + 4 * columns;
      const p = weights[i]!;
      const q = weights[i + 1]!;
      const r = weights[j]!;
      const s = weights[j + 1]!;
      const u = weights[l]!;
      const v = weights[l + 1]!;
      target[to] =
        p * a[from]! - q * a[from + 1]! + r * b[from]! - s * b[from + 1]! + u * c[from]! - v * c[from + 1]!;
      target[to + 1] =
        p * a[from + 1]! + q * a[from]! + r * b[from + 1]! + s * b[from]! + u * c[from + 1]! + v * c[from]!;
    }
  }
}

function transformRows(engine: TransformEngine, image: Float32Array, { rows, columns }: CoarseGrid): void {
  engine.transformAxis({
    source: image,
    target: image,
    outer: rows,
    inner: 1,
    length: columns,
    inverse: true,
  });
}

function addBlockEnergies(
  image: Float32Array,
  grid: CoarseGrid,
  out: Float32Array,
  label: number,
  labels: number,
): void {
  for (let y = 0, i = 0; y < grid.rows; y++) {
    const base = Math.floor(y / BLOCK) * grid.blockColumns;
    for (let x = 0; x < grid.columns; x++, i += 2) {
      out[(base + (x >> 2)) * labels + label]! += image[i]! ** 2 + image[i + 1]! ** 2; // >> 2: BLOCK is 4
    }
  }
}

/**
 * Energy of all echoes over blocks, and the closest two echoes' sums of `second conj(first)`, interleaved complex;
 * [blockRows, blockColumns].
 */
function blockEnergies(
  engine: TransformEngine,
  lines: readonly Float32Array[],
  model: FatWaterModel,
  grid: CoarseGrid,
): { energy: Float32Array; pairs: Float64Array } {
  const energy = new Float32Array(grid.blockRows * grid.blockColumns);
  const left = Math.floor(model.length / 2) - Math.floor(grid.columns / 2);
  const images = lines.map((echo) => {
    const image = engine.allocate(2 * grid.rows * grid.columns, false);
    for (let y = 0; y < grid.rows; y++) {
      const from = 2 * (y * grid.rowStep * model.length + left);
      image.set(echo.subarray(from, from + 2 * grid.columns), 2 * y * grid.columns);
    }
    transformRows(engine, image, grid);
    addBlockEnergies(image, grid, energy, 0, 1);
    return image;
  });
  const { first, second } = closestEchoes(model.timing.echoSeconds);
  const pairs = blockPairs(images[first]!, images[second]!, grid);
  for (const image of images) engine.release(image);
  return { energy, pairs };
}

function blockPairs(first: Float32Array, second: Float32Array, grid: CoarseGrid): Float64Array {
  const out = new Float64Array(2 * grid.blockRows * grid.blockColumns);
  for (let y = 0, i = 0; y < grid.rows; y++) {
    const base = Math.floor(y / BLOCK) * grid.blockColumns;
    for (let x = 0; x < grid.columns; x++, i += 2) {
      const to = 2 * (base + Math.floor(x / BLOCK));
      out[to]! += second[i]! * first[i]! + second[i + 1]! * first[i + 1]!;
      out[to + 1]! += second[i + 1]! * first[i]! - second[i]! * first[i + 1]!;
    }
  }
  return out;
}

/** Share of the strongest block's signal above which a block's expected field is looked for. */
const SIGNAL_SHARE = 1e-3;

/** What the mean slope makes the field in each block, in labels from zero; beyond the signal as far as within it. */
function expectedLabels(
  pairs: Float64Array,
  energy: Float32Array,
  grid: CoarseGrid,
  labelsPerRadian: number,
): Float64Array {
  const { blockRows, blockColumns } = grid;
  const [x, y] = meanStep(pairs, grid).map((radians) => radians * labelsPerRadian) as [number, number];
  const expected = Float64Array.from(
    energy,
    (_, node) =>
      x * ((node % blockColumns) - (blockColumns - 1) / 2) +
      y * (Math.floor(node / blockColumns) - (blockRows - 1) / 2),
  );
  const level = SIGNAL_SHARE * energy.reduce((high, value) => Math.max(high, value), 0);
  const inside = expected.filter((_, node) => energy[node]! > level);
  const [low, high] = [
    inside.reduce((a, b) => Math.min(a, b), 0),
    inside.reduce((a, b) => Math.max(a, b), 0),
  ];
  return expected.map((label) => Math.min(high, Math.max(low, label)));
}

/** Mean step of the phase from a block to the next, radians, weighted by their signal; along columns and along rows. */
function meanStep(pairs: Float64Array, { blockRows, blockColumns }: CoarseGrid): [x: number, y: number] {
  const sums = [0, 0, 0, 0];
  for (let row = 0, node = 0; row < blockRows; row++) {
    for (let column = 0; column < blockColumns; column++, node++) {
      const [re, im] = [pairs[2 * node]!, pairs[2 * node + 1]!];
      const add = (next: number, at: number) => {
        const [a, b] = [pairs[2 * next]!, pairs[2 * next + 1]!];
        const weight = 1 / Math.sqrt(Math.hypot(a, b) * Math.hypot(re, im) || 1); // counts like the signal, not its square
        sums[at]! += weight * (a * re + b * im);
        sums[at + 1]! += weight * (b * re - a * im);
      };
      if (column + 1 < blockColumns) add(node + 1, 0);
      if (row + 1 < blockRows) add(node + blockColumns, 2);
    }
  }
  return [Math.atan2(sums[1]!, sums[0]!), Math.atan2(sums[3]!, sums[2]!)];
}

interface Labels {
  /** Number of those that costs are known for; the middle one is no field. */
  readonly labels: number;
  /** Labels to each side of the expected one that are considered. */
  readonly reach: number;
  /** [blockRows, blockColumns], from the middle one. */
  readonly expected: Float64Array;
}

/** @returns the label of each block, fractions of one kept from what was expected, counted from 0 */
function chooseLabels(
  costs: Float32Array,
  energy: Float32Array,
  { blockRows, blockColumns }: CoarseGrid,
  { labels, reach, expected }: Labels,
  stepHz: number,
): Float64Array {
  const level = energy.reduce((most, value) => Math.max(most, value), 0) || 1;
  const middle = (labels - 1) / 2;
  const considered = 2 * reach + 1;
  const priced = new Float32Array(energy.length * considered);
  for (let node = 0, i = 0; node < energy.length; node++) {
    const own = costs.subarray(node * labels, (node + 1) * labels);
    const share = energy[node]! / level;
    for (let label = -reach; label <= reach; label++, i++) {
      const offset = label + expected[node]!;
      const isKnown = Math.abs(offset) < middle + 0.5;
      const cost = isKnown ? lowestNear(own, middle + offset) / level : share;
      priced[i] = cost + (ZERO_PULL * share * Math.abs(offset) * stepHz) / 100;
    }
  }
  const price = (a: number, b: number | undefined) =>
    (stepHz / PRICE_HZ) * (Math.min(a, b ?? 0) / level + 1e-5);
  const right = energy.map((value, node) => price(value, energy[node + 1]));
  const down = energy.map((value, node) => price(value, energy[node + blockColumns]));
  const chosen = minimizeLabels(
    { rows: blockRows, columns: blockColumns, labels: considered, costs: priced, right, down },
    ROUNDS,
  );
  return expected.map((label, node) => middle + label + chosen[node]! - reach);
}

/** The lowest cost within half a label of a place: which of two candidates falls between labels must not decide. */
function lowestNear(costs: Float32Array, place: number): number {
  const before = cubicAt(costs, place - 0.5);
  const at = cubicAt(costs, place);
  const after = cubicAt(costs, place + 0.5);
  const curvature = before - 2 * at + after;
  const isInside = curvature > 0 && Math.abs(before - after) < 2 * curvature;
  const least = isInside ? at - (before - after) ** 2 / (8 * curvature) : Math.min(before, at, after);
  return Math.max(0, least);
}

/** The lowest cost nearest each chosen label, between labels by a parabola; its curvature as weight. */
function refineLabels(costs: Float32Array, chosen: Float64Array, labels: number, stepHz: number) {
  const fieldHz = new Float32Array(chosen.length);
  const weights = new Float32Array(chosen.length);
  let left = 0;
  for (let node = 0; node < chosen.length; node++) {
    const cost = (label: number) => costs[node * labels + label]!;
    let label = Math.min(labels - 2, Math.max(1, Math.round(chosen[node]!)));
    while (label > 1 && cost(label - 1) < cost(label)) label--;
    while (label < labels - 2 && cost(label + 1) < cost(label)) label++;
    const curvature = cost(label - 1) - 2 * cost(label) + cost(label + 1);
    const aside = curvature > 0 ? (0.5 * (cost(label - 1) - cost(label + 1))) / curvature : 0;
    fieldHz[node] = (label - (labels - 1) / 2 + Math.min(1, Math.max(-1, aside))) * stepHz;
    weights[node] = Math.max(0, curvature);
    left += cost(label);
  }
  return { fieldHz, weights, left };
}

/** From block centres to pixels, cubic along both axes. */
function toPixels(blocks: Float32Array, grid: CoarseGrid, rows: number, length: number): Float32Array {
  const { blockRows, blockColumns, columns, rowStep } = grid;
  const wide = new Float32Array(blockRows * length);
  for (let b = 0; b < blockRows; b++) {
    const line = blocks.subarray(b * blockColumns, (b + 1) * blockColumns);
    for (let x = 0; x < length; x++) {
      const column = ((x - Math.floor(length / 2)) * columns) / length + Math.floor(columns / 2);
      wide[b * length + x] = cubicAt(line, (column - (BLOCK - 1) / 2) / BLOCK);
    }
  }
  const out = new Float32Array(rows * length);
  const line = new Float64Array(blockRows);
  for (let x = 0; x < length; x++) {
    for (let b = 0; b < blockRows; b++) line[b] = wide[b * length + x]!;
    for (let y = 0; y < rows; y++)
      out[y * length + x] = cubicAt(line, (y / rowStep - (BLOCK - 1) / 2) / BLOCK);
  }
  return out;
}
