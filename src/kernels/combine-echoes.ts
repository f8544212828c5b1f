import type { TransformEngine } from "./transform.js";

/**
 * Combine the channels of several echoes with one set of complex weights per pixel, the same for all echoes, so that the
 * phases between echoes stay and the level is that of the root of the sum of squares.
 *
 * The weights are the strongest eigenvector of the channels' covariance over blocks of pixels and all echoes (Walsh,
 * Gmitro, Marcellin 2000, Magn Reson Med 43:682), found by power iteration. Their common phase, which the method leaves
 * open, is carried along each row so that neighbours have a real, positive inner product: then the combined signal of a
 * spin that is displaced along the row by d pixels differs from that of a spin in place by d^2/2 times the square of
 * the weights' change per pixel only, not by d times it.
 */
/** Blocks along the longer axis: sensitivities hardly change over one. */
const MOST_BLOCKS = 32;
const ROUNDS = 2;
/** Share of the strongest block's energy below which a block keeps its neighbour's weights. */
const FLOOR = 1e-4;

/** The channels' images of one echo, wherever they lie: interleaved complex64, strides in floats. */
export interface ChannelImages {
  readonly data: Float32Array;
  /** Of the first pixel. */
  readonly start: number;
  readonly coilStride: number;
  readonly rowStride: number;
}

export interface ChannelWeights {
  readonly coils: number;
  /** Pixels of a block along each axis. */
  readonly block: number;
  readonly blockRows: number;
  readonly blockColumns: number;
  /** Unit vectors, interleaved complex, [blockRows, blockColumns, coils]. */
  readonly vectors: Float64Array;
}

/** @param echoes noise alike and uncorrelated between channels */
export function channelWeights(
  echoes: readonly ChannelImages[],
  coils: number,
  rows: number,
  columns: number,
): ChannelWeights {
  const block = Math.ceil(Math.max(rows, columns) / MOST_BLOCKS);
  const blockRows = Math.ceil(rows / block);
  const blockColumns = Math.ceil(columns / block);
  const means = echoes.map((echo) => blockSums(echo, coils, rows, columns, block));
  const vectors = new Float64Array(2 * blockRows * blockColumns * coils);
  const energy = blockEnergy(means, coils, blockRows * blockColumns);
  const floor = FLOOR * energy.reduce((most, value) => Math.max(most, value), 0);
  const search = new StrongestVector(means, coils, blockRows, blockColumns, floor);
  let previous = unitVector(coils);
  for (let row = 0; row < blockRows; row++) {
    // Each row starts at its strongest block, from the weights above it, and goes outwards from there.
    const line = energy.subarray(row * blockColumns, (row + 1) * blockColumns);
    const start = line.indexOf(Math.max(...line));
    const at = (r: number, c: number) =>
      vectors.subarray(2 * (r * blockColumns + c) * coils, 2 * (r * blockColumns + c + 1) * coils);
    if (row > 0) previous = at(row - 1, start);
    search.from(previous, row, start, at(row, start));
    for (let c = start + 1; c < blockColumns; c++) search.from(at(row, c - 1), row, c, at(row, c));
    for (let c = start - 1; c >= 0; c--) search.from(at(row, c + 1), row, c, at(row, c));
  }
  return { coils, block, blockRows, blockColumns, vectors };
}

/**
 * `out[pixel] = sum_c conj(weight_c) echo_c`, the weights linear between the centres of blocks.
 * @returns one array for each echo, interleaved complex64, [rows, columns]
 */
export function combineEchoes(
  echoes: readonly ChannelImages[],
  weights: ChannelWeights,
  rows: number,
  columns: number,
  engine: TransformEngine,
): Float32Array[] {
  const { coils, block, blockRows, blockColumns } = weights;
  const out = echoes.map(() => engine.allocate(2 * rows * columns));
  const line = engine.allocate(2 * columns, false);
  const across = cells(columns, block, blockColumns);
  const along = cells(rows, block, blockRows);
  const knots = new Float64Array(2 * coils * (blockColumns + 1));
  for (let y = 0; y < rows; y++) {
    rowKnots(weights, along.cell[y]!, along.share[y]!, knots);
    for (let coil = 0; coil < coils; coil++) {
      interpolateRow(knots.subarray(2 * coil * (blockColumns + 1)), across, line);
      for (let e = 0; e < echoes.length; e++) {
        const { data, start, coilStride, rowStride } = echoes[e]!;
        const from = start + coil * coilStride + y * rowStride;
        engine.loops.addWeighted(data, from, line, out[e]!, 2 * y * columns);
      }
    }
    scaleRow(out, 2 * y * columns, knots, across, coils);
  }
  engine.release(line);
  const combined = out.map((image) => image.slice());
  for (const image of out) engine.release(image);
  return combined;
}

interface Cells {
  /** Block before each pixel's place among block centres. */
  readonly cell: Int32Array;
  /** Share of the next block. */
  readonly share: Float64Array;
}

function cells(pixels: number, block: number, blocks: number): Cells {
  const share = Float64Array.from({ length: pixels }, (_, pixel) =>
    Math.min(blocks - 1, Math.max(0, (pixel - (block - 1) / 2) / block)),
  );
  const cell = Int32Array.from(share, (place) => Math.max(0, Math.min(blocks - 2, Math.floor(place))));
  return { cell, share: share.map((place, i) => place - cell[i]!) };
}

/** Weights at the block centres of a row, interleaved complex, [coils, blockColumns + 1]; the last one twice. */
function rowKnots(weights: ChannelWeights, top: number, share: number, knots: Float64Array): void {
  const { coils, blockRows, blockColumns, vectors } = weights;
  const below = blockRows > 1 ? 2 * blockColumns * coils : 0;
  for (let coil = 0, to = 0; coil < coils; coil++) {
    for (let c = 0; c <= blockColumns; c++) {
      const at = 2 * ((top * blockColumns + Math.min(c, blockColumns - 1)) * coils + coil);
      for (let part = 0; part < 2; part++, to++) {
        knots[to] = vectors[at + part]! + share * (vectors[at + below + part]! - vectors[at + part]!);
      }
    }
  }
}

/** Weights of one channel at the pixels of a row, interleaved complex, linear between its knots. */
function interpolateRow(knots: Float64Array, across: Cells, line: Float32Array): void {
  for (let x = 0, i = 0; i < line.length; x++, i += 2) {
    const a = 2 * across.cell[x]!;
    const u = across.share[x]!;
    line[i] = knots[a]! + u * (knots[a + 2]! - knots[a]!);
    line[i + 1] = knots[a + 1]! + u * (knots[a + 3]! - knots[a + 1]!);
  }
}

/** Divide a row of each image by the norm of its weights, which is a little below 1 between knots. */
function scaleRow(
  images: readonly Float32Array[],
  from: number,
  knots: Float64Array,
  across: Cells,
  coils: number,
): void {
  const length = knots.length / coils;
  const squares = new Float64Array(length / 2);
  const products = new Float64Array(length / 2); // of each knot with the next
  for (let coil = 0, base = 0; coil < coils; coil++, base += length) {
    for (let c = 0, i = base; c < squares.length; c++, i += 2) {
      squares[c]! += knots[i]! * knots[i]! + knots[i + 1]! * knots[i + 1]!;
      if (c + 1 < squares.length) products[c]! += knots[i]! * knots[i + 2]! + knots[i + 1]! * knots[i + 3]!;
    }
  }
  for (let x = 0, to = from; x < across.cell.length; x++, to += 2) {
    const c = across.cell[x]!;
    const u = across.share[x]!;
    const square = (1 - u) * (1 - u) * squares[c]! + 2 * u * (1 - u) * products[c]! + u * u * squares[c + 1]!;
    const gain = square > 0 ? 1 / Math.sqrt(square) : 0;
    for (const image of images) {
      image[to]! *= gain;
      image[to + 1]! *= gain;
    }
  }
}

/** Sums over blocks of pixels (of every second row, if a block has four or more), interleaved complex, [blockRows, blockColumns, coils]. */
function blockSums(
  { data, start, coilStride, rowStride }: ChannelImages,
  coils: number,
  rows: number,
  columns: number,
  block: number,
): Float64Array {
  const blockColumns = Math.ceil(columns / block);
  const out = new Float64Array(2 * Math.ceil(rows / block) * blockColumns * coils);
  const step = block >= 4 ? 2 : 1;
  for (let coil = 0; coil < coils; coil++) {
    for (let y = 0; y < rows; y += step) {
      let from = start + coil * coilStride + y * rowStride;
      let to = 2 * (Math.floor(y / block) * blockColumns * coils + coil);
      for (let left = 0; left < columns; left += block, to += 2 * coils) {
        let re = 0;
        let im = 0;
        for (let x = Math.min(block, columns - left); x > 0; x--, from += 2) {
          re += data[from]!;
          im += data[from + 1]!;
        }
        out[to]! += re;
        out[to + 1]! += im;
      }
    }
  }
  return out;
}

function blockEnergy(means: readonly Float64Array[], coils: number, blocks: number): Float64Array {
  const out = new Float64Array(blocks);
  for (const mean of means) {
    for (let i = 0; i < mean.length; i++) out[Math.floor(i / (2 * coils))]! += mean[i]! * mean[i]!;
  }
  return out;
}

function unitVector(coils: number): Float64Array {
  return new Float64Array(2 * coils).map((_, i) => (i % 2 === 0 ? 1 / Math.sqrt(coils) : 0));
}

/** Power iteration on the covariance of a block and its eight neighbours. */
class StrongestVector {
  readonly #next: Float64Array;

  constructor(
    private readonly means: readonly Float64Array[],
    private readonly coils: number,
    private readonly blockRows: number,
    private readonly blockColumns: number,
    private readonly floor: number,
  ) {
    this.#next = new Float64Array(2 * coils);
  }

  /** @param start unit vector; `target` receives the unit vector with a real, positive product with it */
  from(start: Float64Array, row: number, column: number, target: Float64Array): void {
    target.set(start);
    for (let round = 0; round < ROUNDS; round++) this.#step(row, column, target);
    const [re, im] = innerProduct(target, start);
    turn(target, re, im);
  }

  #step(row: number, column: number, vector: Float64Array): void {
    const { means, coils, blockRows, blockColumns } = this;
    const next = this.#next;
    for (let i = 0; i < next.length; i++) next[i] = this.floor * vector[i]!;
    for (let r = Math.max(0, row - 1); r <= Math.min(blockRows - 1, row + 1); r++) {
      for (let c = Math.max(0, column - 1); c <= Math.min(blockColumns - 1, column + 1); c++) {
        const weight = (r === row ? 2 : 1) * (c === column ? 2 : 1);
        const at = 2 * (r * blockColumns + c) * coils;
        for (const mean of means) addProjection(mean, at, weight, vector, next);
      }
    }
    let norm = 0;
    for (const value of next) norm += value * value;
    const gain = norm > 0 ? 1 / Math.sqrt(norm) : 0;
    if (gain > 0) for (let i = 0; i < next.length; i++) vector[i] = gain * next[i]!;
  }
}

/** `next += weight * sample (sample^H vector)`, the sample `vector.length` numbers from `at` on. */
function addProjection(
  samples: Float64Array,
  at: number,
  weight: number,
  vector: Float64Array,
  next: Float64Array,
): void {
  let re = 0;
  let im = 0;
  for (let i = 0; i < vector.length; i += 2) {
    const a = samples[at + i]!;
    const b = samples[at + i + 1]!;
    re += a * vector[i]! + b * vector[i + 1]!;
    im += a * vector[i + 1]! - b * vector[i]!;
  }
  re *= weight;
  im *= weight;
  for (let i = 0; i < vector.length; i += 2) {
    const a = samples[at + i]!;
    const b = samples[at + i + 1]!;
    next[i]! += a * re - b * im;
    next[i + 1]! += a * im + b * re;
  }
}

/** `a^H b`. */
function innerProduct(a: Float64Array, b: Float64Array): [re: number, im: number] {
  let re = 0;
  let im = 0;
  for (let i = 0; i < a.length; i += 2) {
    re += a[i]! * b[i]! + a[i + 1]! * b[i + 1]!;
    im += a[i]! * b[i + 1]! - a[i + 1]! * b[i]!;
  }
  return [re, im];
}

/** Multiply a vector by the phase of `re + i im`. */
function turn(vector: Float64Array, re: number, im: number): void {
  const size = Math.hypot(re, im);
  if (size === 0) return;
  for (let i = 0; i < vector.length; i += 2) {
    const a = vector[i]!;
    const b = vector[i + 1]!;
    vector[i] = (a * re - b * im) / size;
    vector[i + 1] = (a * im + b * re) / size;
  }
}
