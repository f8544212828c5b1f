import { CAP_ROWS, fitText, textSteps } from "./font.js";
import { drawFooter, type FooterItem, footerHeight, scaleBarItem, textItem } from "./footer.js";
import { automaticRange } from "./grey-range.js";
import { shortNumber } from "./number-text.js";
import { CAUTION, encodePng, type Picture } from "./png.js";
import { Raster } from "./raster.js";
import { type PixelMm, resample, type SquareSize, squareSize } from "./square-pixels.js";

export interface SignedMapOptions {
  /** The value shown in the darkest orange; minus this in the darkest blue. Default: from the values inside the outline, rounded up. */
  readonly limit?: number;
  /** Unit of the values, such as "mm" or "Hz". */
  readonly unit: string;
  readonly pixelMm: PixelMm;
  readonly title?: string;
  /** What the values are, written beside the colour bar: "displacement". */
  readonly quantity?: string;
  /** Same shape as the map; the edge of what is not 0 is drawn, and what is 0 decides no colours. */
  readonly outlineMask?: ArrayLike<number>;
}

export interface SignedMap {
  readonly picture: Picture;
  readonly png: Uint8Array;
  readonly limit: number;
  /** Values inside the outline beyond the limit, which are shown in the end colours. */
  readonly beyondLimit: number;
}

/**
 * From -1 (blue) over 0 (white) to 1 (orange) in steps of 1/4. Blue and orange stay apart with every common colour
 * blindness; both sides fall in lightness alike (CIE L* 100, 84, 68, 52, 36), so that sizes compare across the sign.
 * Source: Moreland 2009, Diverging color maps for scientific visualization, doi:10.1007/978-3-642-10520-3_9.
 */
const STOPS: readonly (readonly [number, number, number])[] = [
  [19, 88, 139],
  [17, 129, 203],
  [89, 171, 248],
  [184, 212, 250],
  [255, 255, 255],
  [243, 201, 174],
  [224, 148, 95],
  [188, 101, 30],
  [133, 67, 8],
];
const NO_VALUE = [176, 176, 176];
const PAPER = [255, 255, 255];
const INK = [34, 34, 34];
const MARGIN_PX = 14;
const BAR_GAP_PX = 20;
const BAR_WIDTH_PX = 20;
const STEP_PX = 2;
const WANTED_PX = 448;
/** A limit that float32 rounded upward is not exceeded by itself. */
const ROUNDING = 1 + 1e-6;

/** Red, green and blue (0 to 255) of a value given in shares of the limit; clipped at -1 and 1, grey for NaN. */
export function divergingColour(share: number): readonly number[] {
  if (Number.isNaN(share)) return NO_VALUE;
  const at = (Math.max(-1, Math.min(1, share)) + 1) * 4;
  const below = STOPS[Math.floor(at)] ?? STOPS[0] ?? PAPER;
  const above = STOPS[Math.ceil(at)] ?? below;
  return below.map((level, channel) => Math.round(level + ((above[channel] ?? level) - level) * (at % 1)));
}

/**
 * A map of signed values [y, x] in colour, with the bar that explains the colours and a scale bar in millimetres:
 * x to the right, y downward, a millimetre as long across as down. Values are never interpolated; NaN is grey.
 */
export function signedMapPicture(
  values: ArrayLike<number>,
  y: number,
  x: number,
  options: SignedMapOptions,
): SignedMap {
  const { unit, title = "", quantity, outlineMask } = options;
  if (values.length !== y * x || (outlineMask && outlineMask.length !== y * x)) {
    throw new RangeError(`a map of [${y}, ${x}] needs ${y * x} values in the map and in its mask`);
  }
  const inside = outlineMask
    ? Float64Array.from(values).filter((_, i) => outlineMask[i])
    : Float64Array.from(values);
  const limit = options.limit ?? roundUp(automaticRange("signed", inside).high);
  if (!(limit > 0)) throw new RangeError(`the limit of a signed map must be above 0, not ${limit}`);
  const beyondLimit = inside.filter((value) => Math.abs(value) > limit * ROUNDING).length;

  const size = squareSize(x, y, options.pixelMm, WANTED_PX);
  const barTitle = quantity ? `${quantity} (${unit})` : unit;
  const labels = [1, 0.5, 0, -0.5, -1].map((share) => ({ share, text: signedText(share * limit) }));
  const labelWidth = Math.max(...labels.map((label) => textSteps(label.text))) * STEP_PX;
  const barLeft = MARGIN_PX + size.width + BAR_GAP_PX;
  const width = barLeft + BAR_WIDTH_PX + labelWidth + 12 * STEP_PX + (CAP_ROWS + 2) * STEP_PX + MARGIN_PX;
  const available = width - 2 * MARGIN_PX;
  const footer = footerItems(size, beyondLimit, `${shortNumber(limit)} ${unit}`, available);
  const top = MARGIN_PX + (title ? 14 * STEP_PX : CAP_ROWS * STEP_PX);
  const footerTop = top + size.height + 5 * STEP_PX;

  const height = footerTop + footerHeight(footer, available, STEP_PX) + MARGIN_PX;
  const raster = new Raster(width, height, 3, PAPER);
  const style = { levels: INK, stepPx: STEP_PX };
  const fitted = fitText(title, available / STEP_PX / 1.1); // bold strokes are wider
  raster.text(fitted, MARGIN_PX, MARGIN_PX + CAP_ROWS * STEP_PX, { ...style, isBold: true });
  drawMap(raster, values, x, y, size, top, limit, outlineMask);
  drawBar(raster, barLeft, top, size.height, labels);
  const titleRight = width - MARGIN_PX;
  const barTitleStyle = { ...style, anchor: "middle", isVertical: true } as const;
  raster.text(fitText(barTitle, size.height / STEP_PX), titleRight, top + size.height / 2, barTitleStyle);
  drawFooter(raster, footer, MARGIN_PX, footerTop, available, STEP_PX);

  const picture = raster.picture();
  const range = `blue ${-limit}, white 0, orange ${limit} ${unit}; ${beyondLimit} values beyond`;
  const texts = { ...(title && { Title: title }), "Colour range": range };
  return { picture, png: encodePng(picture, { pixelMm: size.pixelMm, texts }), limit, beyondLimit };
}

function footerItems(size: SquareSize, beyondLimit: number, limit: string, available: number): FooterItem[] {
  const style = { levels: INK, stepPx: STEP_PX };
  const items = [scaleBarItem(size.pixelMm.x, size.width / 3, style)];
  if (beyondLimit > 0) items.push(textItem(`${beyondLimit} pixels beyond \u00b1${limit}`, available, style));
  items.push(textItem(CAUTION, available, style));
  return items;
}

/** The map in its frame, and the outline: picture pixels whose neighbour lies on the other side of the mask's edge. */
function drawMap(
  raster: Raster,
  values: ArrayLike<number>,
  columns: number,
  rows: number,
  size: SquareSize,
  top: number,
  limit: number,
  outlineMask: ArrayLike<number> | undefined,
): void {
  raster.fillBox(MARGIN_PX - 1, top - 1, size.width + 2, size.height + 2, INK);
  // Colours belong to the map's pixels; the picture repeats them.
  const colours = Array.from(values, (value) => divergingColour(value / limit));
  const source = resample(
    Float32Array.from({ length: values.length }, (_, i) => i),
    columns,
    rows,
    size,
    false,
  );
  const mask = outlineMask && resample(outlineMask, columns, rows, size, false);
  const isIn = (x: number, y: number) =>
    x >= 0 && x < size.width && y >= 0 && y < size.height && mask?.[y * size.width + x] !== 0;
  const isEdge = (x: number, y: number) =>
    [isIn(x - 1, y), isIn(x + 1, y), isIn(x, y - 1), isIn(x, y + 1)].some((side) => side !== isIn(x, y));
  for (let y = 0; y < size.height; y++) {
    for (let x = 0; x < size.width; x++) {
      const colour = colours[source[y * size.width + x]!]!;
      raster.fillBox(MARGIN_PX + x, top + y, 1, 1, mask && isEdge(x, y) ? INK : colour);
    }
  }
}

/** The bar, orange at the top, with a tick at each label and a line across it at zero. */
function drawBar(
  raster: Raster,
  left: number,
  top: number,
  height: number,
  labels: readonly { share: number; text: string }[],
): void {
  raster.fillBox(left - 1, top - 1, BAR_WIDTH_PX + 2, height + 2, INK);
  for (let row = 0; row < height; row++) {
    const share = height > 1 ? 1 - (2 * row) / (height - 1) : 0;
    raster.fillBox(left, top + row, BAR_WIDTH_PX, 1, divergingColour(share));
  }
  for (const { share, text } of labels) {
    const at = top + Math.round(((1 - share) / 2) * (height - 1));
    const isZero = share === 0;
    raster.fillBox(isZero ? left : left + BAR_WIDTH_PX, at, (isZero ? BAR_WIDTH_PX : 0) + 6, 1, INK);
    const baseline = at + Math.floor((CAP_ROWS * STEP_PX) / 2) + 1;
    raster.text(text, left + BAR_WIDTH_PX + 10, baseline, { levels: INK, stepPx: STEP_PX });
  }
}

/** A number with its sign, also a plus; zero has none. */
function signedText(value: number): string {
  return value > 0 ? `+${shortNumber(value)}` : shortNumber(value);
}

/** The next round number from `value` (> 0) on; its half is round too. */
function roundUp(value: number): number {
  const power = 10 ** Math.floor(Math.log10(value));
  const factor = [1, 1.5, 2, 3, 4, 5, 6, 8].find((each) => each * power >= value * (1 - 1e-6)) ?? 10;
  return Number((factor * power).toPrecision(2));
}
