import { UsageError } from "../errors.js";
import { channelWeights, combineEchoes } from "../kernels/combine-echoes.js";
import { turnHz } from "../kernels/echo-times.js";
import type { TransformEngine } from "../kernels/transform.js";
import { cropStart, type FrameAxis } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { SAME_BUT_FOR } from "./field-values.js";
import { axisLength, type Frame, type Layout } from "./stage.js";

/** When and how fast each echo was read. */
export interface EchoTiming {
  /** Echo times, seconds since the excitation. */
  readonly echoSeconds: readonly number[];
  /** Hz from one pixel of the image to the next along x; negative where the echo was read backward. */
  readonly pixelBandwidthHz: readonly number[];
}

/**
 * Timing of a scan's echoes for the pixels of a layout.
 * @throws UsageError for an echo without its time or with lines of both directions
 */
export function echoTiming(id: string, layout: Layout, scan: ScanFacts): EchoTiming {
  const echoSeconds = echoSecondsOf(id, scan);
  return {
    echoSeconds,
    pixelBandwidthHz: echoSeconds.map((_, echo) => signedPixelBandwidthHz(id, layout, scan, echo)),
  };
}

/** Echo times, seconds. @throws UsageError for an echo without its time */
export function echoSecondsOf(id: string, scan: ScanFacts): readonly number[] {
  const { contrast } = scan.lengths;
  const echoSeconds = scan.echoTimesSeconds.slice(0, contrast);
  if (echoSeconds.length < contrast)
    throw new UsageError(
      { field: id },
      `the header has ${echoSeconds.length} echo times for ${contrast} echoes`,
      "Give them: --set 'scan.echo-ms=[2.3, 4.6]'",
    );
  return echoSeconds;
}

/** Hz from one pixel to the next along x; negative for an echo read backward. @throws UsageError for a mixed one */
export function signedPixelBandwidthHz(id: string, layout: Layout, scan: ScanFacts, echo: number): number {
  const polarity = scan.polarity[echo];
  if (polarity === "mixed")
    throw new UsageError(
      { field: id },
      `echo ${echo} has lines read in both directions, which move apart`,
      "Set scan.readout-polarity where the header is wrong",
    );
  const hz = pixelBandwidthHz(layout, scan);
  return polarity === "reverse" ? -hz : hz;
}

/** Hz from one pixel of a layout to the next along x: the readout's bandwidth over its field of view, times the pixel. */
export function pixelBandwidthHz(layout: Layout, scan: ScanFacts): number {
  return pixelMm(layout) / (scan.dwellSeconds * scan.encoded.fovMm.x);
}

/** Displacement along x, mm for each Hz: of the forward echoes, of backward ones where all are. */
export function displacementMmPerHz(layout: Layout, scan: ScanFacts): number {
  const direction = scan.polarity.every((each) => each === "reverse") ? -1 : 1;
  return (direction * pixelMm(layout)) / pixelBandwidthHz(layout, scan);
}

/** Physics of a plan that measures a field, where nothing tells a whole turn from none. */
export function sameButFor({ echoSeconds, pixelBandwidthHz: hz }: EchoTiming): Record<string, number> {
  const turn = turnHz(echoSeconds, hz);
  return turn === undefined ? {} : { [SAME_BUT_FOR]: rounded(turn) };
}

/** Pixel size along x, mm. */
export function pixelMm(layout: Layout): number {
  return layout.fovMm.x / axisLength(layout, "x");
}

/** Pixels along x of the reconstructed field of view; a layout with the readout's margin has more. */
export function columnsInView(layout: Layout, scan: ScanFacts): number {
  return Math.min(axisLength(layout, "x"), Math.round(scan.reconstructed.fovMm.x / pixelMm(layout)));
}

/** The layout of maps that belong to a frame: real, without echoes and channels, cut to the reconstructed field of view. */
export function mapLayout(layout: Layout, scan: ScanFacts): Layout {
  const columns = columnsInView(layout, scan);
  const kept = layout.axes
    .map((axis, i) => ({ axis, length: axis === "x" ? columns : layout.shape[i]! }))
    .filter(({ axis }) => axis !== "contrast" && axis !== "coil");
  return {
    ...layout,
    kind: "real",
    axes: kept.map(({ axis }) => axis),
    shape: kept.map(({ length }) => length),
    fovMm: { ...layout.fovMm, x: columns * pixelMm(layout) },
  };
}

/**
 * @param mend of too few echoes
 * @throws UsageError for channels that are combined, fewer than `least` echoes, or projections
 */
export function checkEchoes(id: string, layout: Layout, scan: ScanFacts, least: number, mend: string): void {
  if (!layout.axes.includes("coil") || layout.inImage.length < 3)
    throw new UsageError({ field: id }, "needs the images of single channels", "Put inverse-fft before it");
  if (scan.lengths.contrast < least)
    throw new UsageError({ field: id }, `needs ${least} echoes, the file has ${scan.lengths.contrast}`, mend);
  if (scan.dimensions === 1)
    throw new UsageError({ field: id }, "needs images, the file has projections", "Take the stage out");
}

/** The images of one group, [contrast, slice, coil, z, y, x] with the axes that are not together left out. */
export class EchoFrame {
  readonly echoes: number;
  readonly slices: number;
  readonly coils: number;
  readonly partitions: number;
  readonly rows: number;
  readonly columns: number;
  readonly #data: Float32Array;

  constructor({ data, layout }: Frame) {
    const length = (axis: FrameAxis | "coil" | "z" | "y" | "x") => axisLength(layout, axis);
    this.echoes = length("contrast");
    this.slices = length("slice");
    this.coils = length("coil");
    this.partitions = length("z");
    this.rows = length("y");
    this.columns = length("x");
    this.#data = data;
  }

  /** One channel's image, a view: [y, x]. */
  image(echo: number, slice: number, coil: number, z: number): Float32Array {
    const size = 2 * this.rows * this.columns;
    const start = this.#start(echo, slice, coil, z);
    return this.#data.subarray(start, start + size);
  }

  /** Float at which an image starts. */
  #start(echo: number, slice: number, coil: number, z: number): number {
    const index = ((echo * this.slices + slice) * this.coils + coil) * this.partitions + z;
    return 2 * this.rows * this.columns * index;
  }

  /** The echoes of one image combined with one set of channel weights, [y, columns] each: the middle columns of x. */
  combined(slice: number, z: number, columns: number, engine: TransformEngine): Float32Array[] {
    const size = 2 * this.rows * this.columns;
    const echoes = Array.from({ length: this.echoes }, (_, echo) => ({
      data: this.#data,
      start: this.#start(echo, slice, 0, z) + 2 * cropStart(this.columns, columns),
      coilStride: size * this.partitions,
      rowStride: 2 * this.columns,
    }));
    const weights = channelWeights(echoes, this.coils, this.rows, columns);
    return combineEchoes(echoes, weights, this.rows, columns, engine);
  }
}

/** The middle `kept` of each row of `length` complex pixels. */
export function cropRows(image: Float32Array, length: number, kept: number, target: Float32Array): void {
  const first = 2 * cropStart(length, kept);
  for (let from = first, to = 0; from < image.length; from += 2 * length, to += 2 * kept)
    target.set(image.subarray(from, from + 2 * kept), to);
}

/** A number as plans show it: six digits. */
export function rounded(value: number): number {
  return Number(value.toPrecision(6));
}
