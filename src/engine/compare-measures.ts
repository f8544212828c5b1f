import { type Edge, edgeAt, edgeFigures, edgeProfile, findEdge } from "../kernels/edge-profile.js";
import {
  backgroundDeviationFactor,
  normalizedRmsError,
  peakSnrDb,
  SSIM_TAPS,
  structuralSimilarity,
  windowMeans,
} from "../kernels/image-quality.js";
import { type AxisWindow, sampledWindow, windowFigures } from "../kernels/point-spread.js";
import { regionStatistics } from "../kernels/region.js";
import { noiseCovarianceFactor, rssStandardDeviation } from "../physics/noise-statistics.js";
import type { ScanFacts } from "../physics/scan.js";
import { lineGains } from "../stages/apodize.js";
import { axisLength } from "../stages/stage.js";
import type { VariantImages } from "./compare.js";
import { joined } from "./placement.js";
import { pixelSizeMm } from "./plan.js";
import { isSameGrid, samePixel, samePlace } from "./same-place.js";

/** One column of a comparison: a theory and a measurement are two. */
export interface MeasureColumn {
  readonly id: string;
  readonly label: string;
  readonly unit: string;
  readonly describe: string;
}

export const MEASURES: readonly MeasureColumn[] = [
  {
    id: "widthTheoryMm",
    label: "width, theory",
    unit: "mm",
    describe:
      "full width at half maximum of the line spread across the edge's axis, from the windows of the recipe",
  },
  {
    id: "widthMeasuredMm",
    label: "width, measured",
    unit: "mm",
    describe: "the same, from the edge's profile on the image",
  },
  {
    id: "overshootTheory",
    label: "overshoot, theory",
    unit: "%",
    describe: "the first peak behind an edge, on its bright side, of the jump",
  },
  {
    id: "overshootMeasured",
    label: "overshoot, measured",
    unit: "%",
    describe: "the same on the image, its bright side levelled; noise and edges near by change it",
  },
  { id: "undershootTheory", label: "undershoot, theory", unit: "%", describe: "the first trough behind it" },
  {
    id: "undershootMeasured",
    label: "undershoot, measured",
    unit: "%",
    describe: "the same on the image, its bright side levelled; noise and edges near by change it",
  },
  {
    id: "noiseTheory",
    label: "noise, propagated",
    unit: "",
    describe:
      "mean standard deviation in the region, by propagation through the linear stages and the combination",
  },
  {
    id: "noiseMeasured",
    label: "noise, measured",
    unit: "",
    describe: "the same over pseudo-replicas, or from the noise region",
  },
  {
    id: "snr",
    label: "SNR",
    unit: "",
    describe: "mean of the region over its noise: the measured one, if there is one",
  },
  {
    id: "nrmse",
    label: "NRMSE",
    unit: "%",
    describe: "root mean square difference from the reference over the reference's norm, all chosen images",
  },
  { id: "psnrDb", label: "PSNR", unit: "dB", describe: "against the reference's maximum" },
  {
    id: "ssim",
    label: "SSIM",
    unit: "",
    describe: "structural similarity to the reference (Wang et al. 2004), its maximum as the range",
  },
];

export type MeasureValues = Readonly<Record<string, number | null>>;

export interface MeasureSettings {
  /** Where the edge is; found on the reference if left out. */
  readonly edge?: { readonly axis: "x" | "y"; readonly line: number; readonly positionPixels: number };
  /** [y, x], of the reference's matrix: where signal and noise are taken. */
  readonly region: Uint8Array;
  /** Where there is noise alone. */
  readonly noiseRegion?: Uint8Array;
}

export interface Profile {
  readonly name: string;
  readonly distancesMm: Float64Array;
  readonly values: Float64Array;
}

export interface Measured {
  readonly values: readonly MeasureValues[];
  readonly edge: Edge | undefined;
  readonly profiles: readonly Profile[];
  /** What a reader of the figures must know. */
  readonly remarks: readonly string[];
  /** By propagation, of the shown image: standard deviation of each pixel. */
  readonly noiseMaps: readonly Float32Array[];
}

/** Theory and measurement of every variant; what cannot be had is null. @param shown index of the image for edge and regions */
export function measureVariants(
  variants: readonly VariantImages[],
  reference: VariantImages,
  shown: number,
  settings: MeasureSettings,
  scan: ScanFacts,
): Measured {
  const edge = edgeOf(reference, shown, settings);
  const noiseMaps = variants.map((variant) => propagatedNoise(variant, shown, scan));
  const all = joined(reference.images);
  const peak = all.reduce((most, value) => Math.max(most, value), 0);
  const shape = [reference.height, reference.width] as const;
  const isLarge = shape.every((length) => length >= SSIM_TAPS);
  const means = isLarge ? reference.images.map((image) => windowMeans(image, shape)) : undefined;
  const measured = variants.map((variant, v) => {
    const found = edge && edgeOn(variant, shown, edge, reference);
    const values = {
      ...theoryOf(variant, edge?.axis ?? "x"),
      ...found?.figures,
      ...noiseOf(variant, shown, noiseMaps[v]!, settings, reference),
      ...differenceOf(variant, reference, all, peak, means),
    };
    return {
      values: Object.fromEntries(MEASURES.map(({ id }) => [id, finite(values[id as keyof typeof values])])),
      profile: found?.profile,
      shadingPerMm: found?.shadingPerMm ?? 0,
    };
  });
  return {
    values: measured.map(({ values }) => values),
    edge,
    remarks: remarksOn(measured[variants.indexOf(reference)]!, edge),
    profiles: measured.flatMap(({ profile }) => (profile ? [profile] : [])),
    noiseMaps,
  };
}

/** An edge this much wider than the windows allow is not sharp itself. */
const SOFT_EDGE = 1.5;

function remarksOn(
  { values, shadingPerMm }: { values: MeasureValues; shadingPerMm: number },
  edge: Edge | undefined,
): string[] {
  if (!edge) return ["no straight edge between two levels was found: name one with --edge"];
  const { widthMeasuredMm: measured, widthTheoryMm: theory, ...ringing } = values;
  if (!measured || !theory) return [];
  const digits = (value: number) => Number(value.toPrecision(3));
  if (measured >= SOFT_EDGE * theory)
    return [
      `the edge is softer than the resolution (${digits(measured)} mm, ${digits(theory)} by theory): widths and ringing are the object's; name a sharper one with --edge`,
    ];
  return [
    ...(shadingPerMm === 0
      ? []
      : [
          `the bright side of the edge slopes by ${digits(100 * shadingPerMm)} % of the jump per mm, as coils shade it: taken off the profiles`,
        ]),
    ...(isLevel(ringing) ? [] : [UNEVEN]),
  ];
}

const UNEVEN =
  "overshoot and undershoot at the edge are not the windows' alone: shading, noise or another edge lies beside it; name another with --edge";

/** Half of Gibbs' 9 % of the jump: a level side's ringing is nearer to its theory. */
const MOST_STRAY = 4.5;

function isLevel(ringing: MeasureValues): boolean {
  const stray = (which: string) => Math.abs(ringing[`${which}Measured`]! - ringing[`${which}Theory`]!);
  return Math.max(stray("overshoot"), stray("undershoot")) < MOST_STRAY;
}

const finite = (value: number | undefined) => (value !== undefined && Number.isFinite(value) ? value : null);

/** Lines averaged for an edge, to each side, and pixels to each side along them. */
const EDGE = { sideLines: 3, reachPixels: 8 };

function edgeImage(variant: VariantImages, shown: number) {
  const { height, width, channels } = variant;
  return { data: variant.images[shown]!, height, width, channels };
}

function edgeOf(reference: VariantImages, shown: number, { edge }: MeasureSettings): Edge | undefined {
  const image = edgeImage(reference, shown);
  if (edge) return edgeAt(image, edge.axis, edge.line, edge.positionPixels, EDGE);
  const found = findEdge(image, EDGE);
  return found && isStep(edgeFigures(edgeProfile(image, found, EDGE))) ? found : undefined;
}

/**
 * No window overshoots an edge by more than 9 % (Gibbs), and noise and shading add some; what is beyond is no step but
 * the rim of something thin, on which width and ringing mean nothing.
 */
function isStep({ overshoot, undershoot }: { overshoot: number; undershoot: number }): boolean {
  return Math.max(overshoot, undershoot) < MOST_RINGING;
}
const MOST_RINGING = 0.35;

/** The same edge on a variant of perhaps another matrix or field of view. */
function edgeOn(variant: VariantImages, shown: number, edge: Edge, reference: VariantImages) {
  const image = edgeImage(variant, shown);
  const [from, to] = [reference.plan.result, variant.plan.result];
  const line = samePixel(edge.line, edge.axis === "x" ? "y" : "x", from, to);
  if (line === undefined) return undefined;
  const own = edgeAt(image, edge.axis, line, samePlace(edge.offsetPixels, edge.axis, from, to), EDGE);
  if (!own) return undefined;
  const profile = edgeProfile(image, own, EDGE);
  const figures = edgeFigures(profile);
  const pixel = pixelSizeMm(variant.plan.result)[edge.axis];
  return {
    shadingPerMm: profile.shadingPerPixel / pixel,
    figures: {
      widthMeasuredMm: figures.fwhmPixels * pixel,
      overshootMeasured: 100 * figures.overshoot,
      undershootMeasured: 100 * figures.undershoot,
    },
    profile: {
      name: variant.name,
      distancesMm: profile.distancesPixels.map((pixels) => pixels * pixel),
      values: profile.values,
    },
  };
}

/** The windows of a variant along one axis as one, and the nominal pixel that its figures are in. */
export function axisWindow(
  { plan }: VariantImages,
  axis: "x" | "y",
): { window: AxisWindow; pixelMm: number } {
  const stage = plan.stages.find((each) => each.stage.id === "apodize");
  const layout = stage?.input ?? plan.placed;
  const length = axisLength(layout, axis);
  const { first, last } = layout.acquired[axis];
  const gains = Float64Array.from({ length }, (_, i) => (i >= first && i <= last ? 1 : 0));
  for (const { stage: each, params, input, arrays } of plan.stages)
    if (each.id === "apodize") multiply(gains, lineGains(input, params, axis, arrays));
  return { window: sampledWindow(gains), pixelMm: layout.fovMm[axis] / length };
}

function multiply(gains: Float64Array, others: Float64Array): void {
  for (let i = 0; i < gains.length; i++) gains[i]! *= others[i]!;
}

function theoryOf(variant: VariantImages, axis: "x" | "y") {
  const { window, pixelMm } = axisWindow(variant, axis);
  const figures = windowFigures(window);
  return {
    widthTheoryMm: figures.lineFwhmPixels * pixelMm,
    overshootTheory: 100 * figures.edgeOvershoot,
    undershootTheory: 100 * figures.edgeUndershoot,
  };
}

/**
 * Standard deviation of each pixel by propagation: noise keeps its gain through the linear stages; the root of the sum
 * of squares of n channels of that noise about the signal has the deviation of the noncentral chi distribution. Without whitening the
 * channels' noise is taken as uncorrelated, of its root mean square over them; unknown without noise readouts.
 * Source: Kellman and McVeigh 2005, Magn Reson Med 54:1439; Constantinides et al. 1997, Magn Reson Med 38:852.
 */
function propagatedNoise(
  { images, coils, noise }: VariantImages,
  shown: number,
  scan: ScanFacts,
): Float32Array {
  const gain = noise.gain * (noise.whitened ? 1 : receiverNoise(scan));
  if (!(gain > 0)) return new Float32Array(images[shown]!.length);
  const deviationAt = deviationTable(coils);
  // The mean square of the magnitude is the signal's and that of the noise.
  return images[shown]!.map(
    (value) => gain * deviationAt(Math.sqrt(Math.max(0, (value / gain) ** 2 - 2 * coils))),
  );
}

/** Of a part of a stored sample, root mean square over the channels; 0 where no noise readouts tell. */
function receiverNoise({
  noise,
  channels,
  dwellSeconds,
  relativeReceiverNoiseBandwidth: share,
}: ScanFacts): number {
  if (!noise) return 0;
  let trace = 0;
  for (let c = 0; c < channels; c++) trace += noise.covariance[2 * (c * channels + c)]!;
  return Math.sqrt((trace * noiseCovarianceFactor(noise.dwellSeconds, dwellSeconds, share)) / (2 * channels));
}

const deviationTables = new Map<number, Float64Array>();
const TABLE_STEP = 0.05;

/** Deviation over signal, both in units of the noise, from a table: the hypergeometric series is slow. */
function deviationTable(coils: number): (signal: number) => number {
  const known = deviationTables.get(coils);
  const most = 4 * Math.sqrt(coils) + 12; // beyond, it is 1 within a hundredth
  const table =
    known ??
    Float64Array.from({ length: Math.ceil(most / TABLE_STEP) + 2 }, (_, i) =>
      rssStandardDeviation(coils, 1, i * TABLE_STEP),
    );
  deviationTables.set(coils, table);
  return (signal) => {
    const at = Math.min(table.length - 2, signal / TABLE_STEP);
    const cell = Math.floor(at);
    return table[cell]! + (at - cell) * (table[cell + 1]! - table[cell]!);
  };
}

function noiseOf(
  variant: VariantImages,
  shown: number,
  map: Float32Array,
  { region, noiseRegion }: MeasureSettings,
  reference: VariantImages,
) {
  if (!isSameGrid(variant.plan.result, reference.plan.result)) return {};
  const image = variant.images[shown]!;
  const noiseTheory = regionStatistics(map, region).mean;
  const noiseMeasured = variant.deviation
    ? regionStatistics(variant.deviation, region).mean
    : noiseRegion &&
      regionStatistics(image, noiseRegion).standardDeviation / backgroundDeviationFactor(variant.coils);
  const noise = noiseMeasured ?? noiseTheory;
  return {
    noiseTheory: noiseTheory || undefined,
    noiseMeasured,
    snr: noise > 0 ? regionStatistics(image, region).mean / noise : undefined,
  };
}

/** Against the reference, over all chosen images. @param means of its images under the window of SSIM, if that fits */
function differenceOf(
  variant: VariantImages,
  reference: VariantImages,
  other: Float32Array,
  peak: number,
  means: readonly Float64Array[] | undefined,
) {
  if (!isSameGrid(variant.plan.result, reference.plan.result)) return {};
  if (variant === reference) return { nrmse: 0, ssim: 1 };
  const own = joined(variant.images);
  const shape = [variant.height, variant.width] as const;
  const similar = means
    ? variant.images.map((image, i) =>
        structuralSimilarity(image, reference.images[i]!, shape, peak, undefined, means[i]),
      )
    : [Number.NaN];
  return {
    nrmse: 100 * normalizedRmsError(own, other, "norm"),
    psnrDb: peakSnrDb(own, other, peak),
    ssim: similar.reduce((sum, value) => sum + value, 0) / similar.length,
  };
}
