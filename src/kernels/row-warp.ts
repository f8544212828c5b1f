import { besselI0 } from "./special-functions.js";
import type { Taps, TransformEngine } from "./transform.js";

/**
 * Band-limited resampling of image rows at displaced places, and its transpose.
 *
 * A row of N pixels is transformed to k-space, divided by the transform of the kernel, zero-filled to a grid twice as
 * fine, and read there with a Kaiser-Bessel kernel six grid points wide (beta 13.8551): the trigonometric polynomial
 * through the pixels, with a relative error below 2e-5, in O(N log N).
 *
 * Source: Fessler and Sutton 2003, IEEE Trans Signal Process 51:560, doi:10.1109/TSP.2002.807005; kernel width and
 * shape: Beatty, Nishimura, Pauly 2005, IEEE Trans Med Imaging 24:799, doi:10.1109/TMI.2005.848376.
 */
export interface RowWarp {
  readonly rows: number;
  /** Pixels of a row on the image side. */
  readonly inputLength: number;
  /** Places per row. */
  readonly outputLength: number;
  /** On the fine grid of 2 inputLength points. */
  readonly taps: Taps;
  /** Gain of each k of a row: one over the transform of the kernel. */
  readonly gain: Float32Array;
  /** Places that fall outside the image and read as zero. */
  readonly outside: number;
}

const TAPS = 6;
const OVERSAMPLING = 2;
const BETA = 13.8551;
const TABLE_STEPS = 2048; // per grid point; linear interpolation between them errs by less than 1e-6 of the peak

/** Lengths that are transformed to warp rows of so many pixels. */
export function warpLengths(inputLength: number): number[] {
  return [inputLength, OVERSAMPLING * inputLength];
}

/**
 * Plan to read (or write) rows of `inputLength` pixels at places given in pixels from pixel floor(inputLength / 2).
 * @param places pixels, [rows, outputLength]; places beyond the outermost pixels by more than half a pixel are outside
 */
export function planRowWarp(places: ArrayLike<number>, rows: number, inputLength: number): RowWarp {
  const outputLength = places.length / rows;
  const start = new Int32Array(places.length);
  const taps = new Float32Array(places.length * TAPS + 2);
  const table = TABLE;
  const lowest = -Math.floor(inputLength / 2) - 0.5;
  let outside = 0;
  for (let i = 0; i < places.length; i++) {
    const place = places[i]!;
    if (!(place >= lowest && place < lowest + inputLength)) {
      outside++;
      continue;
    }
    const fine = OVERSAMPLING * place + inputLength; // centre of the fine grid of 2 N points is N
    const first = Math.ceil(fine - TAPS / 2);
    start[i] = first;
    const at = (first - fine + TAPS / 2) * TABLE_STEPS;
    const cell = Math.floor(at);
    const share = at - cell;
    for (let t = 0, from = cell * TAPS; t < TAPS; t++, from++) {
      taps[i * TAPS + t] = table[from]! + share * (table[from + TAPS]! - table[from]!);
    }
  }
  return { rows, inputLength, outputLength, taps: { start, taps }, gain: kernelGain(inputLength), outside };
}

/**
 * Read image rows at the planned places.
 * @param image  interleaved complex64, [rows, inputLength]
 * @param target interleaved complex64, [rows, outputLength]; overwritten
 */
export function gatherRows(
  engine: TransformEngine,
  warp: RowWarp,
  image: Float32Array,
  target: Float32Array,
): void {
  const { rows, inputLength } = warp;
  const lines = engine.allocate(2 * rows * inputLength, false);
  engine.transformAxis({
    source: image,
    target: lines,
    outer: rows,
    inner: 1,
    length: inputLength,
    inverse: false,
  });
  gatherLines(engine, warp, lines, target);
  engine.release(lines);
}

/**
 * Read the images of k-space rows at the planned places.
 * @param lines  interleaved complex64, [rows, inputLength], k ascending; multiplied in place by the kernel's gain
 * @param target interleaved complex64, [rows, outputLength]; overwritten
 */
export function gatherLines(
  engine: TransformEngine,
  warp: RowWarp,
  lines: Float32Array,
  target: Float32Array,
): void {
  const { rows, inputLength } = warp;
  const length = OVERSAMPLING * inputLength;
  const grid = engine.allocate(2 * rows * length, false);
  engine.loops.scaleRows(lines, warp.gain);
  engine.transformAxis({
    source: lines,
    target: grid,
    outer: rows,
    inner: 1,
    length,
    inputLength,
    inverse: true,
    scale: Math.sqrt(OVERSAMPLING),
  });
  engine.loops.gatherTaps(grid, warp.taps, rows, target);
  engine.release(grid);
}

/**
 * The transpose: k-space rows of point sources at the planned places, `N^-1/2 sum_p v_p exp(-i 2 pi k place_p / N)`.
 * @param values interleaved complex64, [rows, outputLength]
 * @param lines  interleaved complex64, [rows, inputLength], k ascending; overwritten
 */
export function scatterRows(
  engine: TransformEngine,
  warp: RowWarp,
  values: Float32Array,
  lines: Float32Array,
): void {
  const { rows, inputLength } = warp;
  const length = OVERSAMPLING * inputLength;
  const grid = engine.allocate(2 * rows * length);
  engine.loops.scatterTaps(grid, warp.taps, rows, values);
  engine.transformAxis({
    source: grid,
    target: lines,
    outer: rows,
    inner: 1,
    length,
    outputLength: inputLength,
    inverse: false,
    scale: Math.sqrt(OVERSAMPLING),
  });
  engine.release(grid);
  engine.loops.scaleRows(lines, warp.gain);
}

/** The six kernel values for each offset of the first grid point under the kernel, [TABLE_STEPS + 2, TAPS]; peak 1. */
function kernelTable(): Float64Array {
  const table = new Float64Array((TABLE_STEPS + 2) * TAPS);
  const peak = besselI0(BETA);
  for (let i = 0; i < table.length; i++) {
    const fromEdge = Math.floor(i / TAPS) / TABLE_STEPS + (i % TAPS);
    const u = (2 * fromEdge) / TAPS - 1;
    table[i] = Math.abs(u) <= 1 ? besselI0(BETA * Math.sqrt(1 - u * u)) / peak : 0;
  }
  return table;
}

const TABLE = kernelTable();

/** One over the kernel's transform at k = -floor(N/2) .. of a row of N pixels on a grid of 2 N points. */
function kernelGain(inputLength: number): Float32Array {
  const peak = besselI0(BETA);
  return Float32Array.from({ length: inputLength }, (_, j) => {
    const k = (j - Math.floor(inputLength / 2)) / (OVERSAMPLING * inputLength); // cycles per grid point
    const root = Math.sqrt(BETA * BETA - (Math.PI * TAPS * k) ** 2); // real: pi * 6 / 4 < beta
    return (peak * root) / (TAPS * Math.sinh(root));
  });
}
