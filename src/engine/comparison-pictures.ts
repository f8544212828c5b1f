import path from "node:path";
import { pointSpread } from "../kernels/point-spread.js";
import { formatRecipe } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { VERSION } from "../version.js";
import { type Chart, chartSvg } from "../writers/chart.js";
import { divergingColour } from "../writers/colour-map.js";
import { comparisonPage } from "../writers/comparison-page.js";
import { automaticRange, type GreyRange, toGrey8 } from "../writers/grey-range.js";
import { montage } from "../writers/montage.js";
import type { FileHashes } from "../writers/output-file.js";
import { encodePng } from "../writers/png.js";
import { resample, squareSize } from "../writers/square-pixels.js";
import { type Compared, imageLabel, type VariantImages } from "./compare.js";
import { axisWindow, MEASURES, type Measured, type MeasureSettings } from "./compare-measures.js";
import { joined } from "./placement.js";
import { pixelSizeMm } from "./plan.js";
import { isSameGrid, samePixel } from "./same-place.js";
import { CAUTION } from "./sidecar.js";

/** Where edge and regions are, with words for each. */
export type DescribedSettings = MeasureSettings & {
  readonly describe: readonly (readonly [string, string])[];
};

/** All that a comparison's outputs are made of. */
export interface ComparisonParts {
  readonly file: string;
  readonly compared: Compared;
  readonly reference: VariantImages;
  readonly measured: Measured;
  readonly settings: DescribedSettings;
  readonly input: FileHashes;
}

/** One grey range for all: that of the shown images together. */
export function commonRange(variants: readonly VariantImages[], shown: number): GreyRange {
  return automaticRange("magnitude", joined(variants.map(({ images }) => images[shown]!)));
}

/** The shown image under every variant on the reference's matrix, labelled. */
export function imagesPicture({ file, compared, reference }: ComparisonParts, range: GreyRange) {
  return tiles(
    reference,
    compared,
    `${path.basename(file)}: ${placeLabel(compared, reference)}`,
    "magnitude",
    (variant) => onMatrix(variant, reference, variant.images[compared.shown]!),
    range,
  );
}

/** Noise of the shown image under every variant on the reference's matrix, [variant, y, x]: measured where it was, else propagated. */
export function noiseMaps({ compared, reference, measured }: ComparisonParts): Float32Array {
  return joined(
    compared.variants.map((variant, v) =>
      onMatrix(variant, reference, variant.deviation ?? measured.noiseMaps[v]!),
    ),
  );
}

/** The same as a picture, at one grey range. */
export function noisePicture({ compared, reference }: ComparisonParts, maps: Float32Array) {
  const how = reference.deviation ? "over pseudo-replicas" : "by propagation";
  const size = reference.height * reference.width;
  return tiles(reference, compared, `standard deviation of the noise, ${how}`, "magnitude", (_, v) =>
    maps.subarray(v * size, (v + 1) * size),
  );
}

/** Every variant less the reference, about middle grey. */
export function differencesPicture({ compared, reference }: ComparisonParts) {
  return tiles(reference, compared, `difference from ${reference.name}`, "signed", (variant) =>
    differenceFrom(variant, reference, compared.shown),
  );
}

function tiles(
  reference: VariantImages,
  { variants }: Compared,
  title: string,
  kind: "magnitude" | "signed",
  valuesOf: (variant: VariantImages, v: number) => Float32Array,
  range?: GreyRange,
) {
  const { height, width } = reference;
  const values = new Float32Array(variants.length * height * width);
  variants.forEach((variant, v) => void values.set(valuesOf(variant, v), v * height * width));
  return montage({
    values,
    rows: 1,
    tiles: variants.length,
    height,
    width,
    pixelMm: pixelSizeMm(reference.plan.result),
    kind,
    title,
    tileLabels: variants.map(({ name }) => shortName(name)),
    ...(range && { range: { low: range.low, high: range.high } }),
  });
}

/** `apodize.window=hann` as `window=hann`: tiles are narrow. */
function shortName(name: string): string {
  return name.replaceAll(/(^|, )[a-z-]+\./g, "$1");
}

/** The variant's pixels nearest to the reference's; NaN where it does not reach so far. */
function onMatrix(variant: VariantImages, reference: VariantImages, image: Float32Array): Float32Array {
  const [from, to] = [reference.plan.result, variant.plan.result];
  if (isSameGrid(from, to)) return image;
  const { height, width } = reference;
  const rows = Array.from({ length: height }, (_, y) => samePixel(y, "y", from, to));
  const columns = Array.from({ length: width }, (_, x) => samePixel(x, "x", from, to));
  return Float32Array.from({ length: height * width }, (_, i) => {
    const [y, x] = [rows[Math.floor(i / width)], columns[i % width]];
    return y === undefined || x === undefined ? Number.NaN : image[y * variant.width + x]!;
  });
}

function differenceFrom(variant: VariantImages, reference: VariantImages, shown: number): Float32Array {
  const other = reference.images[shown]!;
  return onMatrix(variant, reference, variant.images[shown]!).map((value, i) => value - other[i]!);
}

/** Which of the file's images is shown and measured. */
export function placeLabel(
  { scan, places, shown }: Compared,
  reference: Pick<VariantImages, "plan">,
): string {
  return imageLabel(scan.facts, places[shown]!, axisLength(reference.plan.result, "z"));
}

export function edgeChart({ profiles, edge }: Measured): Chart {
  return {
    title: "Edge profiles",
    x: { label: "distance from the edge", unit: "mm" },
    y: { label: "level, 0 to 1 across the edge" },
    series: profiles.length
      ? profiles.map(({ name, distancesMm, values }) => ({
          name: shortName(name),
          x: distancesMm,
          y: values,
        }))
      : [{ name: "no straight edge found", x: [0, 1], y: [Number.NaN, Number.NaN] }],
    ...(edge && { references: [{ axis: "y" as const, at: 1, label: "bright level" }] }),
    aspect: 0.6,
  };
}

const SPREAD_REACH_PIXELS = 5;
const SPREAD_STEPS = 16;
const FLOOR_DB = -60;

export function spreadChart(variants: readonly VariantImages[], { edge }: Measured): Chart {
  const count = 2 * SPREAD_REACH_PIXELS * SPREAD_STEPS + 1;
  const positions = Float64Array.from({ length: count }, (_, i) => i / SPREAD_STEPS - SPREAD_REACH_PIXELS);
  return {
    title: `Point spread along ${edge?.axis ?? "x"}, theory`,
    x: { label: "position", unit: "mm" },
    y: { label: "level", unit: "dB", domain: [FLOOR_DB, 3] },
    series: variants.map((variant) => {
      const { window, pixelMm } = axisWindow(variant, edge?.axis ?? "x");
      const spread = pointSpread(window, positions);
      return {
        name: shortName(variant.name),
        x: positions.map((pixels) => pixels * pixelMm),
        y: Array.from(spread, (value) => Math.max(FLOOR_DB, 20 * Math.log10(Math.max(value, 1e-9)))),
      };
    }),
    aspect: 0.6,
  };
}

/** The page that shows it all. */
export function pageOf(
  parts: ComparisonParts,
  range: GreyRange,
  charts: Readonly<Record<string, Chart>>,
): string {
  const { file, compared, reference, measured, settings, input } = parts;
  const { variants, shown, places, imagesInAll, passes } = compared;
  const differences = variants.map((variant) =>
    variant === reference ? undefined : differenceFrom(variant, reference, shown),
  );
  const limit = differenceLimit(differences);
  return comparisonPage({
    title: `Comparison: ${path.basename(file)}`,
    caution: CAUTION,
    facts: [
      ["input", `${path.basename(file)}, ${input.bytes} bytes, SHA-256 ${input.sha256}`],
      ["program", `carillon ${VERSION}`],
      ["image shown", placeLabel(compared, reference)],
      ["differences measured on", `${places.length} of ${imagesInAll} images`],
      ...measured.remarks.map((remark) => ["note", remark] as const),
      ["passes over the file", String(passes)],
      ...settings.describe,
    ],
    reference: reference.name,
    columns: MEASURES,
    variants: variants.map((variant, v) => ({
      name: variant.name,
      values: measured.values[v]!,
      recipe: formatRecipe(variant.recipe),
      image: plainPicture(variant, shown, range),
      difference: differences[v] && coloured(differences[v], reference, limit),
    })),
    differenceLimit: limit,
    greyRange: { black: range.low, white: range.high, rule: range.rule },
    figures: [
      {
        title: "Edge profiles",
        svg: chartSvg(charts["edge-profiles"]!),
        describe: "across one edge of the image, from its dark side to its bright one",
      },
      {
        title: "Point spreads",
        svg: chartSvg(charts["point-spreads"]!),
        describe: "of the windows along the edge's axis, by theory",
      },
    ],
  });
}

/** One limit for all difference pictures. */
function differenceLimit(differences: readonly (Float32Array | undefined)[]): number {
  const ranges = differences.flatMap((values) => (values ? [automaticRange("signed", values).high] : []));
  return Number(Math.max(...ranges, Number.MIN_VALUE).toPrecision(2));
}

/** The image alone, without labels, for the page's divider. */
function plainPicture(variant: VariantImages, shown: number, range: GreyRange): Uint8Array {
  const { height, width, images, plan } = variant;
  const size = squareSize(width, height, pixelSizeMm(plan.result), 1);
  const pixels = toGrey8(resample(images[shown]!, width, height, size, true), range);
  return encodePng(
    { width: size.width, height: size.height, colour: "grey", pixels },
    { pixelMm: size.pixelMm },
  );
}

/** Signed values in colour, pixel by pixel, for the page, which states the scale. */
function coloured(values: Float32Array, { height, width, plan }: VariantImages, limit: number): Uint8Array {
  const size = squareSize(width, height, pixelSizeMm(plan.result), 1);
  const shown = resample(values, width, height, size, false);
  const pixels = new Uint8Array(3 * shown.length);
  shown.forEach((value, i) => void pixels.set(divergingColour(value / limit), 3 * i));
  return encodePng(
    { width: size.width, height: size.height, colour: "rgb", pixels },
    { pixelMm: size.pixelMm },
  );
}
