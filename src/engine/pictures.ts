import { readoutBandwidthHz } from "../physics/bandwidth.js";
import { FRAME_AXES, frameCount } from "../physics/layout.js";
import type { OutputSettings } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { signedMapPicture } from "../writers/colour-map.js";
import { montage, selectImages } from "../writers/montage.js";
import { profilePlot } from "../writers/profile-plot.js";
import { frameCounters, pixelSizeMm } from "./plan.js";
import type { Grid, Product } from "./products.js";
import type { Scan } from "./scan.js";

/** Units that a picture need not name. */
const UNITLESS = ["1", "signal"];

/** Most lines in one plot of 1-D data. */
const PROFILE_LINES = 6;

/**
 * Collects the images of one product that its picture will show, while groups finish in any order; the others pass by.
 * Rows are echoes (and repetitions, sets, phases), tiles are slices in spatial order, or partitions of a volume.
 */
export class PictureCollector {
  readonly #rows: readonly number[];
  /** Kept tiles in the order of their counters; the picture shows them in spatial order. */
  readonly #tiles: readonly number[];
  readonly #totalImages: number;
  /** [row, tile, y, x]. */
  readonly values: Float32Array;
  readonly #partitions: number;

  constructor(
    private readonly file: string,
    private readonly grid: Grid,
    private readonly settings: OutputSettings,
    private readonly product: Product,
  ) {
    const { facts, layout } = grid;
    const { lengths } = facts;
    this.#partitions = axisLength(layout, "z");
    const rows = frameCount(lengths) / lengths.slice;
    const tiles = Array.from({ length: lengths.slice * this.#partitions }, (_, tile) => tile);
    this.#totalImages = rows * tiles.length;
    const limit = facts.dimensions === 1 ? PROFILE_LINES : settings.tileLimit;
    const shown = selectImages(rows, tiles, limit);
    this.#rows = shown.rows;
    this.#tiles = shown.tiles;
    this.values = new Float32Array(shown.rows.length * shown.tiles.length * this.#imageSize);
  }

  get #imageSize(): number {
    return axisLength(this.grid.layout, "y") * axisLength(this.grid.layout, "x");
  }

  /** @param values the real values of one frame, [z, y, x] */
  add(frame: number, values: Float32Array): void {
    const { slice: slices } = this.grid.facts.lengths;
    const row = this.#rows.indexOf(Math.floor(frame / slices));
    if (row < 0) return;
    const slice = frame % slices;
    for (let z = 0; z < this.#partitions; z++) {
      const tile = this.#tiles.indexOf(slice * this.#partitions + z);
      if (tile < 0) continue;
      const image = values.subarray(z * this.#imageSize, (z + 1) * this.#imageSize);
      this.values.set(image, (row * this.#tiles.length + tile) * this.#imageSize);
    }
  }

  /** The finished picture, and what the sidecar says of it. @param scan what the whole file turned out to be */
  draw(
    scan: Scan,
    outline?: Float32Array,
  ): { name: string; png: Uint8Array; pixels: Uint8Array | Uint16Array; record: object } {
    if (this.product.insideOnly && outline)
      for (let i = 0; i < this.values.length; i++) if (!outline[i]) this.values[i] = 0;
    if (this.grid.facts.dimensions === 1) return this.#drawProfiles();
    return this.product.picture === "colour" ? this.#drawColour(scan, outline) : this.#drawMontage(scan);
  }

  /** The kept tiles from the first to the last place in space. */
  #spatialOrder(scan: Scan): number[] {
    const place = (tile: number) => scan.facts.sliceOrder.indexOf(Math.floor(tile / this.#partitions));
    return this.#tiles
      .map((_, t) => t)
      .sort((a, b) => place(this.#tiles[a]!) - place(this.#tiles[b]!) || a - b);
  }

  /** Signed values in colour: all images side by side, rows and slices in the order of a montage. */
  #drawColour(scan: Scan, outline: Float32Array | undefined) {
    const { stem, unit = "" } = this.product;
    const [height, width] = [axisLength(this.grid.layout, "y"), axisLength(this.grid.layout, "x")];
    const tiles = this.#tiles.length;
    const order = this.#spatialOrder(scan);
    const images = this.#rows.flatMap((_, row) => order.map((tile) => row * tiles + tile));
    const mosaic = mosaicOf(this.values, images, height, width, Number.NaN);
    const drawn = signedMapPicture(mosaic.values, mosaic.height, mosaic.width, {
      unit,
      pixelMm: pixelSizeMm(this.grid.layout),
      title: this.#title(),
      quantity: stem.replace(/-[a-z]+$/, ""),
      ...(outline && { outlineMask: mosaicOf(outline, images, height, width, 0).values }),
    });
    const record = {
      file: `${stem}.png`,
      colours: `blue ${-drawn.limit} ${unit}, white 0, orange ${drawn.limit} ${unit}`,
      beyond: drawn.beyondLimit,
      imagesShown: images.length,
      imagesInAll: this.#totalImages,
    };
    return { name: `${stem}.png`, png: drawn.png, pixels: drawn.picture.pixels, record };
  }

  #drawMontage(scan: Scan) {
    const { stem, picture } = this.product;
    const kind = picture === "phase" || picture === "signed" ? picture : "magnitude";
    const { greyLow, greyHigh } = this.settings;
    const order = this.#spatialOrder(scan);
    const pixelMm = pixelSizeMm(this.grid.layout);
    const given = this.product.id === "magnitude" && (greyLow !== undefined || greyHigh !== undefined);
    const drawn = montage({
      values: this.values,
      rows: this.#rows.length,
      tiles: this.#tiles.length,
      height: axisLength(this.grid.layout, "y"),
      width: axisLength(this.grid.layout, "x"),
      pixelMm,
      kind,
      title: this.#title(),
      order,
      tileLabels: this.#tiles.map((tile) => this.#tileLabel(tile)),
      rowLabels: this.#rows.map((row) => this.#rowLabel(row)),
      total: this.#totalImages,
      limit: this.#rows.length * this.#tiles.length,
      bits: this.settings.pngBits,
      ...(given && { range: { low: greyLow, high: greyHigh } }),
      ...(picture === "share" && { range: { low: 0, high: 1 } }),
      ...(this.product.unit && !UNITLESS.includes(this.product.unit) && { unit: this.product.unit }),
    });
    const record = {
      file: `${stem}.png`,
      black: drawn.range.low,
      white: drawn.range.high,
      rule: drawn.range.rule,
      imagesShown: this.#rows.length * this.#tiles.length,
      imagesInAll: this.#totalImages,
      pixelSizeMm: drawn.pixelMm,
    };
    return { name: `${stem}.png`, png: drawn.png, pixels: drawn.picture.pixels, record };
  }

  #drawProfiles() {
    const { stem } = this.product;
    const count = axisLength(this.grid.layout, "x");
    const lines = this.#rows.flatMap((row, r) =>
      this.#tiles.map((tile, t) => ({
        label: [this.#rowLabel(row), this.#tileLabel(tile)].filter(Boolean).join(", "),
        values: this.values.subarray(
          (r * this.#tiles.length + t) * count,
          (r * this.#tiles.length + t + 1) * count,
        ),
      })),
    );
    const { encoded, dwellSeconds } = this.grid.facts;
    const drawn = profilePlot({
      lines,
      pixelMm: pixelSizeMm(this.grid.layout).x,
      hzPerMm: readoutBandwidthHz(dwellSeconds) / encoded.fovMm.x,
      valueLabel: this.product.id,
      title: this.#title(),
      total: this.#totalImages,
    });
    const record = { file: `${stem}.png`, linesShown: lines.length, linesInAll: this.#totalImages };
    return { name: `${stem}.png`, png: drawn.png, pixels: drawn.pixels, record };
  }

  #title(): string {
    const base = this.file.split("/").at(-1) ?? this.file;
    return this.product.id === "magnitude" ? base : `${base}, ${this.product.id}`;
  }

  #tileLabel(tile: number): string {
    const slice = Math.floor(tile / this.#partitions);
    const parts = [];
    if (this.grid.facts.lengths.slice > 1) parts.push(`slice ${slice}`);
    if (this.#partitions > 1) parts.push(`z ${tile % this.#partitions}`);
    return parts.join(" ");
  }

  #rowLabel(row: number): string {
    const { lengths, echoTimesSeconds } = this.grid.facts;
    const counters = frameCounters(this.grid.facts, row * this.grid.facts.lengths.slice);
    return FRAME_AXES.filter((axis) => axis !== "slice" && lengths[axis] > 1)
      .map((axis) => {
        const echo = axis === "contrast" ? echoTimesSeconds[counters.contrast] : undefined;
        if (axis !== "contrast") return `${axis} ${counters[axis]}`;
        return echo === undefined
          ? `echo ${counters.contrast}`
          : `TE ${Number((echo * 1e3).toPrecision(4))} ms`;
      })
      .join(", ");
  }
}

/** Pixels between the images of a mosaic. */
const GAP_PIXELS = 2;

/** Images [y, x] side by side, as nearly square as it goes, `gap` between them. */
function mosaicOf(
  values: Float32Array,
  images: readonly number[],
  height: number,
  width: number,
  gap: number,
) {
  const across = Math.ceil(Math.sqrt(images.length));
  const down = Math.ceil(images.length / across);
  const [fullWidth, fullHeight] = [
    across * (width + GAP_PIXELS) - GAP_PIXELS,
    down * (height + GAP_PIXELS) - GAP_PIXELS,
  ];
  const out = new Float32Array(fullWidth * fullHeight).fill(gap);
  images.forEach((image, place) => {
    const left = (place % across) * (width + GAP_PIXELS);
    const top = Math.floor(place / across) * (height + GAP_PIXELS);
    for (let y = 0; y < height; y++) {
      const from = (image * height + y) * width;
      out.set(values.subarray(from, from + width), (top + y) * fullWidth + left);
    }
  });
  return { values: out, width: fullWidth, height: fullHeight };
}
