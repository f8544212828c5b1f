import { CAP_ROWS, fitText } from "./font.js";
import {
  drawFooter,
  type FooterItem,
  footerHeight,
  greyWedgeItem,
  scaleBarItem,
  textItem,
} from "./footer.js";
import {
  absoluteRange,
  automaticRange,
  type GreyRange,
  toGrey8,
  toGrey16,
  type ValueKind,
} from "./grey-range.js";
import { type Grid, LABEL_LINE_STEPS, MARGIN_PX, type Place, planGrid } from "./montage-grid.js";
import { shortNumber } from "./number-text.js";
import { CAUTION, encodePng, type Picture } from "./png.js";
import { Raster } from "./raster.js";
import { type PixelMm, resample, type SquareSize, squareSize } from "./square-pixels.js";

export interface MontageOptions {
  /** Real values in C order, [rows, tiles, height, width]: rows are echoes or the like, tiles slices; y is downward. */
  readonly values: ArrayLike<number>;
  readonly rows: number;
  readonly tiles: number;
  readonly height: number;
  readonly width: number;
  readonly pixelMm: PixelMm;
  readonly kind: ValueKind;
  readonly title: string;
  /** Unit of the values, shown with the grey range. */
  readonly unit?: string;
  /** One label for each tile, by its index in `values`. */
  readonly tileLabels?: readonly string[];
  /** One label for each row, by its index in `values`. */
  readonly rowLabels?: readonly string[];
  /** Tile indices in the order to show, such as slices by their position. Default: as stored. */
  readonly order?: readonly number[];
  /** Values shown black and white; what is left open is that of `automaticRange` of the images shown. */
  readonly range?: { readonly low?: number | undefined; readonly high?: number | undefined };
  /** Most images to show; of more, those of `selectImages` are. Default 64. */
  readonly limit?: number;
  /** Images that there are in all, where the caller has selected some already: the footer then says "k of n shown". */
  readonly total?: number;
  /** Bits of a grey level. Default 8. */
  readonly bits?: 8 | 16;
}

export interface Montage {
  readonly picture: Picture;
  readonly png: Uint8Array;
  /** For the sidecar. */
  readonly range: GreyRange;
  /** Indices of the tiles and rows that are shown, in their order. */
  readonly shownTiles: readonly number[];
  readonly shownRows: readonly number[];
  /** Size of a pixel of the picture. */
  readonly pixelMm: PixelMm;
}

const BACKGROUND = [44]; // not black: the edge of an image with a black background stays visible
const INK = [225];

/**
 * One grey picture of many images, each with its label above it, at one common grey range: tiles in the given order,
 * from the left and then downward, each row (echo) on a line of its own. A millimetre is as long across as down.
 * @throws UsageError where a given range is none; RangeError where the values do not fill the shape
 */
export function montage(options: MontageOptions): Montage {
  const { values, rows, tiles, height, width, order = indices(tiles), limit = 64, title } = options;
  const imageSize = height * width;
  if (values.length !== rows * tiles * imageSize) {
    throw new RangeError(`[${rows}, ${tiles}, ${height}, ${width}] does not hold ${values.length} values`);
  }
  const { rows: shownRows, tiles: shownTiles } = selectImages(rows, order, limit);
  const images = new Float32Array(shownRows.length * shownTiles.length * imageSize);
  shownRows.forEach((row, r) => {
    shownTiles.forEach((tile, t) => {
      copy(
        values,
        (row * tiles + tile) * imageSize,
        images,
        (r * shownTiles.length + t) * imageSize,
        imageSize,
      );
    });
  });
  const range = rangeOf(options, images);

  const wantedPx = shownRows.length * shownTiles.length > 1 ? 256 : 448;
  const size = squareSize(width, height, options.pixelMm, wantedPx);
  const labels = shownRows.map((row) => shownTiles.map((tile) => labelOf(options, row, tile)));
  const grid = planGrid(size, labels);
  const footer = footerItems(options, range, size, grid, shownRows.length * shownTiles.length);
  const raster = drawFrame(title, grid, footer);
  labels.forEach((line, r) => {
    line.forEach((label, t) => {
      drawLabel(raster, label, grid.place(r, t), grid);
    });
  });
  const canvas =
    options.bits === 16 ? Uint16Array.from(raster.pixels, (level) => level * 257) : raster.pixels;
  const toGrey = options.bits === 16 ? toGrey16 : toGrey8;
  indices(shownRows.length * shownTiles.length).forEach((at) => {
    const image = images.subarray(at * imageSize, (at + 1) * imageSize);
    const block = toGrey(resample(image, width, height, size, options.kind !== "phase"), range);
    const { left, top } = grid.place(Math.floor(at / shownTiles.length), at % shownTiles.length);
    paste(block, size.width, canvas, raster.width, left, top + grid.labelHeight);
  });

  const picture: Picture = { width: raster.width, height: raster.height, colour: "grey", pixels: canvas };
  const unit = options.unit ? ` ${options.unit}` : "";
  const rangeText = `black ${range.low}, white ${range.high}${unit}; ${range.rule}`;
  const png = encodePng(picture, { pixelMm: size.pixelMm, texts: { Title: title, "Grey range": rangeText } });
  return { picture, png, range, shownTiles, shownRows, pixelMm: size.pixelMm };
}

/**
 * The rows and tiles that at most `limit` images show, evenly spaced with the first and the last: all rows where there
 * is room for them, so that every tile shown has all its echoes.
 */
export function selectImages(rows: number, order: readonly number[], limit: number) {
  const shownRows = spread(indices(rows), Math.max(1, limit));
  return { rows: shownRows, tiles: spread(order, Math.max(1, Math.floor(limit / shownRows.length))) };
}

function rangeOf({ range, kind }: MontageOptions, images: Float32Array): GreyRange {
  const automatic = automaticRange(kind, images);
  if (range?.low === undefined && range?.high === undefined) return automatic;
  return absoluteRange(range.low ?? automatic.low, range.high ?? automatic.high);
}

function footerItems(options: MontageOptions, range: GreyRange, size: SquareSize, grid: Grid, shown: number) {
  const style = { levels: INK, stepPx: grid.stepPx };
  const available = grid.width - 2 * MARGIN_PX;
  const isPhase = options.kind === "phase" && !options.range;
  const low = isPhase ? "\u2212\u03c0" : shortNumber(range.low);
  const high = isPhase ? "\u03c0" : shortNumber(range.high);
  const unit = options.unit ?? (isPhase ? "rad" : "");
  const total = options.total ?? options.rows * (options.order?.length ?? options.tiles);
  const items: FooterItem[] = [
    scaleBarItem(size.pixelMm.x, size.width / 2, style),
    greyWedgeItem(low, `${high} ${unit}`.trim(), style),
  ];
  if (shown < total) items.push(textItem(`${shown} of ${total} shown`, available, style));
  items.push(textItem(CAUTION, available, style));
  return items;
}

/** The empty sheet with its title and footer. */
function drawFrame(title: string, grid: Grid, footer: readonly FooterItem[]): Raster {
  const available = grid.width - 2 * MARGIN_PX;
  const footerTop = grid.titleHeight + grid.height;
  const height = footerTop + footerHeight(footer, available, grid.stepPx) + MARGIN_PX / 2;
  const raster = new Raster(grid.width, height, 1, BACKGROUND);
  const style = { levels: INK, stepPx: grid.stepPx, isBold: true };
  raster.text(fitText(title, available / grid.stepPx), MARGIN_PX, (CAP_ROWS + 4) * grid.stepPx, style);
  drawFooter(raster, footer, MARGIN_PX, footerTop - MARGIN_PX / 2, available, grid.stepPx);
  return raster;
}

function drawLabel(raster: Raster, label: readonly string[], { left, top }: Place, grid: Grid): void {
  const stepPx = grid.labelStepPx;
  label.forEach((text, line) => {
    const baseline = top + (line * LABEL_LINE_STEPS + CAP_ROWS + 1) * stepPx;
    raster.text(fitText(text, grid.tileWidth / stepPx), left, baseline, { levels: INK, stepPx });
  });
}

/** The lines of an image's label: its tile, and its row. */
function labelOf(options: MontageOptions, row: number, tile: number): string[] {
  return [options.tileLabels?.[tile] ?? "", options.rowLabels?.[row] ?? ""].filter((text) => text !== "");
}

/** At most `count` of the items, evenly spaced, with the first and the last; the middle one if only one is wanted. */
function spread<T>(items: readonly T[], count: number): T[] {
  if (items.length <= count) return [...items];
  if (count === 1) return items.slice(Math.floor(items.length / 2)).slice(0, 1);
  const step = (items.length - 1) / (count - 1); // above 1, so no item is taken twice
  return indices(count).flatMap((i) => items.slice(Math.round(i * step)).slice(0, 1));
}

function indices(count: number): number[] {
  return Array.from({ length: count }, (_, i) => i);
}

/** Copy a block of pixels into a picture that holds it whole. */
function paste(
  block: Uint8Array | Uint16Array,
  blockWidth: number,
  picture: Uint8Array | Uint16Array,
  pictureWidth: number,
  left: number,
  top: number,
): void {
  for (let row = 0; row * blockWidth < block.length; row++) {
    picture.set(block.subarray(row * blockWidth, (row + 1) * blockWidth), (top + row) * pictureWidth + left);
  }
}

function copy(
  source: ArrayLike<number>,
  from: number,
  target: Float32Array,
  to: number,
  count: number,
): void {
  for (let i = 0; i < count; i++) target[to + i] = source[from + i] ?? 0;
}
