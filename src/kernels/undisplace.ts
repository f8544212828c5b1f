import { foldedPixels, resampleMap, stretchFactors } from "./displacement.js";
import { gatherLines, gatherRows, planRowWarp, type RowWarp, warpLengths } from "./row-warp.js";
import type { TransformEngine } from "./transform.js";

/**
 * Put displaced pixels back: each pixel x of the object is read from the image at `x + displacement(x)` with
 * band-limited interpolation (row-warp.ts) and, on request, multiplied by the stretch factor `1 + d(displacement)/dx`,
 * because the image spread its signal over that many pixels.
 *
 * A field has turned the phase of the image too, by `-2 pi f(x) TE`; where f changes, that moves the signal in k-space,
 * so that the object and its image are cut off at different spatial frequencies. With `accrued` the phase is taken off
 * on a finer grid before the result is limited to the pixels' resolution, and put back on them afterwards.
 *
 * Source: Jezzard and Balaban 1995, Magn Reson Med 34:65, doi:10.1002/mrm.1910340111; with `accrued`, conjugate phase:
 * Maeda, Sano, Yokoyama 1988, IEEE Trans Med Imaging 7:26, times the stretch factor.
 */
export interface UndisplaceOptions {
  /** Pixels, in the object's coordinates, [rows, outputLength]: field / bandwidth per pixel, signed by the direction of reading. */
  readonly displacementPixels: Float32Array;
  /** Multiply by the stretch factor, so that the sum along a row is kept. */
  readonly jacobian: boolean;
  /** The phase that the field has left: Hz, [rows, outputLength], in the object's coordinates, and seconds to k = 0. */
  readonly accrued?: { readonly fieldHz: Float32Array; readonly echoSeconds: number };
}

export interface Undisplacer {
  readonly rows: number;
  readonly inputLength: number;
  readonly outputLength: number;
  /** 1 where several places lie on top of each other, [rows, outputLength]; the images are 0 there. */
  readonly folded: Uint8Array;
  readonly foldedCount: number;
  /** Places of the finest grid in use that were displaced out of the image and read as 0. */
  readonly outsideCount: number;
  /**
   * @param image  interleaved complex64, [rows, inputLength]; not modified
   * @param target interleaved complex64, [rows, outputLength]; overwritten
   */
  apply(engine: TransformEngine, image: Float32Array, target: Float32Array): void;
}

/** How much finer the grid is on which the accrued phase is taken off: room for gradients up to 1/8 turn per pixel. */
const FINER = 1.25;

/**
 * Plan once for all images that share a displacement (channels of one echo).
 * @param rows        rows of the image
 * @param inputLength pixels of an image row; may exceed the output's (centres floor(n / 2) coincide), so that what was
 *   displaced beyond the output's field of view comes back
 * @throws RangeError when the maps do not fit
 */
export function planUndisplace(rows: number, inputLength: number, options: UndisplaceOptions): Undisplacer {
  const { displacementPixels, jacobian, accrued } = options;
  const outputLength = displacementPixels.length / rows;
  if (!Number.isInteger(outputLength) || (accrued && accrued.fieldHz.length !== displacementPixels.length)) {
    throw new RangeError(
      `maps of ${displacementPixels.length} and ${accrued?.fieldHz.length} pixels for ${rows} rows`,
    );
  }
  const folded = foldedPixels(displacementPixels, rows, outputLength);
  const fineRows = accrued ? finer(rows) : rows;
  const fineLength = accrued ? finer(outputLength) : outputLength;
  const fine = accrued
    ? resampleMap(displacementPixels, rows, outputLength, fineRows, fineLength)
    : displacementPixels;
  const step = outputLength / fineLength; // pixels
  const warp = planRowWarp(placesOf(fine, fineRows, fineLength, step), fineRows, inputLength);
  const stretch = stretchFactors(fine, fineRows, fineLength);
  const gains = stretch.map((factor) => (jacobian ? Math.max(0, 1 + (factor - 1) / step) : 1));
  const shared = {
    rows,
    inputLength,
    outputLength,
    folded,
    foldedCount: folded.reduce((n, flag) => n + flag, 0),
  };
  const outsideCount = warp.outside;
  if (!accrued) {
    const apply = (engine: TransformEngine, image: Float32Array, target: Float32Array) =>
      readRows(engine, warp, gains, folded, image, target);
    return { ...shared, outsideCount, apply };
  }
  const turns = resampleMap(accrued.fieldHz, rows, outputLength, fineRows, fineLength);
  const off = phaseFactors(turns, accrued.echoSeconds, gains);
  const on = phaseFactors(
    accrued.fieldHz,
    -accrued.echoSeconds,
    folded.map((flag) => 1 - flag),
  );
  const apply = (engine: TransformEngine, image: Float32Array, target: Float32Array) =>
    readFiner(engine, { rows, outputLength, fineRows, fineLength, warp, off, on }, image, target);
  return { ...shared, outsideCount, apply };
}

/** Lengths that are transformed to put images [rows, inputLength] back to [rows, outputLength]. */
export function undisplaceLengths(rows: number, inputLength: number, outputLength: number): number[] {
  return [rows, finer(rows), outputLength, finer(outputLength), ...warpLengths(inputLength)];
}

function finer(length: number): number {
  return length === 1 ? 1 : 4 * Math.ceil((length * FINER) / 4);
}

/** Where each pixel of the (finer) object grid is seen: pixels of the image from its centre. */
function placesOf(displacement: Float32Array, rows: number, length: number, step: number): Float32Array {
  const centre = Math.floor(length / 2);
  return Float32Array.from(
    { length: rows * length },
    (_, i) => ((i % length) - centre) * step + displacement[i]!,
  );
}

/** `gain exp(+i 2 pi f seconds)`, interleaved. */
function phaseFactors(fieldHz: Float32Array, seconds: number, gains: ArrayLike<number>): Float32Array {
  const out = new Float32Array(2 * fieldHz.length);
  for (let i = 0; i < fieldHz.length; i++) {
    const angle = 2 * Math.PI * fieldHz[i]! * seconds;
    out[2 * i] = gains[i]! * Math.cos(angle);
    out[2 * i + 1] = gains[i]! * Math.sin(angle);
  }
  return out;
}

function readRows(
  engine: TransformEngine,
  warp: RowWarp,
  gains: Float32Array,
  folded: Uint8Array,
  image: Float32Array,
  target: Float32Array,
): void {
  gatherRows(engine, warp, image, target);
  for (let i = 0; i < gains.length; i++) {
    const gain = folded[i] ? 0 : gains[i]!;
    target[2 * i]! *= gain;
    target[2 * i + 1]! *= gain;
  }
}

interface FinerPlan {
  readonly rows: number;
  readonly outputLength: number;
  readonly fineRows: number;
  readonly fineLength: number;
  readonly warp: RowWarp;
  /** Takes the accrued phase off, times the stretch factor, on the finer grid. */
  readonly off: Float32Array;
  /** Puts the phase back on the output's pixels; 0 where folded. */
  readonly on: Float32Array;
}

function readFiner(
  engine: TransformEngine,
  plan: FinerPlan,
  image: Float32Array,
  target: Float32Array,
): void {
  const { rows, outputLength, fineRows, fineLength, warp, off, on } = plan;
  const length = warp.inputLength;
  const spectrum = engine.allocate(2 * rows * length, false);
  engine.transformAxis({
    source: image,
    target: spectrum,
    outer: 1,
    inner: length,
    length: rows,
    inverse: false,
  });
  engine.transformAxis({ source: spectrum, target: spectrum, outer: rows, inner: 1, length, inverse: false });
  const lines = engine.allocate(2 * fineRows * length, false);
  const yScale = Math.sqrt(fineRows / rows);
  engine.transformAxis({
    source: spectrum,
    target: lines,
    outer: 1,
    inner: length,
    length: fineRows,
    inputLength: rows,
    inverse: true,
    scale: yScale,
  });
  engine.release(spectrum);
  const fine = engine.allocate(2 * fineRows * fineLength, false);
  gatherLines(engine, warp, lines, fine);
  engine.release(lines);
  engine.loops.multiplyComplex(fine, off);
  // back to the output's resolution: the centre of k-space of the finer grid
  const half = engine.allocate(2 * fineRows * outputLength, false);
  engine.transformAxis({
    source: fine,
    target: half,
    outer: fineRows,
    inner: 1,
    length: fineLength,
    outputLength,
    inverse: false,
  });
  engine.release(fine);
  const coarse = engine.allocate(2 * rows * outputLength, false);
  engine.transformAxis({
    source: half,
    target: coarse,
    outer: 1,
    inner: outputLength,
    length: fineRows,
    outputLength: rows,
    inverse: false,
  });
  engine.release(half);
  const scale = Math.sqrt(outputLength / fineLength) / yScale;
  engine.transformAxis({
    source: coarse,
    target: coarse,
    outer: rows,
    inner: 1,
    length: outputLength,
    inverse: true,
    scale,
  });
  engine.transformAxis({
    source: coarse,
    target: coarse,
    outer: 1,
    inner: outputLength,
    length: rows,
    inverse: true,
  });
  engine.loops.multiplyComplex(coarse, on);
  target.set(coarse);
  engine.release(coarse);
}
