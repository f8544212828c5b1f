import { FRAME_AXES } from "../physics/layout.js";
import type { OutputSettings } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { montage, selectImages } from "../writers/montage.js";
import { profilePlot } from "../writers/profile-plot.js";
import { frameCounters, type Plan, pixelSizeMm } from "./plan.js";
import type { Product } from "./products.js";
import type { ReadoutFacts } from "./readout-facts.js";
import type { Scan } from "./scan.js";

/** Most lines in one plot of 1-D data. */
const PROFILE_LINES = 6;

/**
 * Collects the images of one product that its picture will show, while groups finish in any order; the others pass by.
 * Rows are echoes (and repetitions, sets, phases), tiles are slices in spatial order, or partitions of a volume.
 */
export class PictureCollector {
  readonly #scan: Scan;
  readonly #plan: Plan;
  readonly #settings: OutputSettings;
  readonly #product: Product;
  readonly #facts: ReadoutFacts;
  readonly #rows: readonly number[];
  readonly #tiles: readonly number[];
  readonly #totalImages: number;
  readonly #values: Float32Array;
  readonly #slicesPerRow: number;
  readonly #partitions: number;

  constructor(scan: Scan, plan: Plan, settings: OutputSettings, product: Product, facts: ReadoutFacts) {
    this.#scan = scan;
    this.#plan = plan;
    this.#settings = settings;
    this.#product = product;
    this.#facts = facts;
    const { lengths, sliceOrder } = scan.facts;
    this.#slicesPerRow = lengths.slice;
    this.#partitions = axisLength(plan.result, "z");
    const rows = FRAME_AXES.filter((axis) => axis !== "slice").reduce(
      (product, axis) => product * lengths[axis],
      1,
    );
    const order = sliceOrder.flatMap((slice) =>
      Array.from({ length: this.#partitions }, (_, z) => slice * this.#partitions + z),
    );
    this.#totalImages = rows * order.length;
    const limit = scan.facts.dimensions === 1 ? PROFILE_LINES : settings.tileLimit;
    const { rows: shownRows, tiles: shownTiles } = selectImages(rows, order, limit);
    this.#rows = shownRows;
    this.#tiles = shownTiles;
    this.#values = new Float32Array(shownRows.length * shownTiles.length * this.#imageSize);
  }

  get #imageSize(): number {
    return axisLength(this.#plan.result, "y") * axisLength(this.#plan.result, "x");
  }

  /** @param values the real values of one frame, [z, y, x] */
  add(frame: number, values: Float32Array): void {
    const row = this.#rows.indexOf(Math.floor(frame / this.#slicesPerRow));
    if (row < 0) return;
    const slice = frame % this.#slicesPerRow;
    for (let z = 0; z < this.#partitions; z++) {
      const tile = this.#tiles.indexOf(slice * this.#partitions + z);
      if (tile < 0) continue;
      const image = values.subarray(z * this.#imageSize, (z + 1) * this.#imageSize);
      this.#values.set(image, (row * this.#tiles.length + tile) * this.#imageSize);
    }
  }

  /** The finished picture, and what the sidecar says of it. */
  draw(): { name: string; png: Uint8Array; pixels: Uint8Array | Uint16Array; record: object }[] {
    return this.#scan.facts.dimensions === 1 ? this.#drawProfiles() : this.#drawMontage();
  }

  #drawMontage() {
    const { stem, picture: kind } = this.#product;
    const { greyLow, greyHigh } = this.#settings;
    const pixelMm = pixelSizeMm(this.#plan.result);
    const given = kind === "magnitude" && (greyLow !== undefined || greyHigh !== undefined);
    const drawn = montage({
      values: this.#values,
      rows: this.#rows.length,
      tiles: this.#tiles.length,
      height: axisLength(this.#plan.result, "y"),
      width: axisLength(this.#plan.result, "x"),
      pixelMm,
      kind: kind!,
      title: this.#title(),
      tileLabels: this.#tiles.map((tile) => this.#tileLabel(tile)),
      rowLabels: this.#rows.map((row) => this.#rowLabel(row)),
      total: this.#totalImages,
      limit: this.#rows.length * this.#tiles.length,
      bits: this.#settings.pngBits,
      ...(given && { range: { low: greyLow, high: greyHigh } }),
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
    return [{ name: `${stem}.png`, png: drawn.png, pixels: drawn.picture.pixels, record }];
  }

  #drawProfiles() {
    const { stem } = this.#product;
    const count = axisLength(this.#plan.result, "x");
    const lines = this.#rows.flatMap((row, r) =>
      this.#tiles.map((tile, t) => ({
        label: [this.#rowLabel(row), this.#tileLabel(tile)].filter(Boolean).join(", "),
        values: this.#values.subarray(
          (r * this.#tiles.length + t) * count,
          (r * this.#tiles.length + t + 1) * count,
        ),
      })),
    );
    const { encodedSpace } = this.#facts;
    const drawn = profilePlot({
      lines,
      pixelMm: pixelSizeMm(this.#plan.result).x,
      hzPerMm: (this.#facts.bandwidthPerPixelHz * encodedSpace.matrix.x) / encodedSpace.fovMm.x,
      valueLabel: this.#product.id,
      title: this.#title(),
      total: this.#totalImages,
    });
    const record = { file: `${stem}.png`, linesShown: lines.length, linesInAll: this.#totalImages };
    return [{ name: `${stem}.png`, png: drawn.png, pixels: drawn.pixels, record }];
  }

  #title(): string {
    const base = this.#scan.file.split("/").at(-1) ?? this.#scan.file;
    return this.#product.id === "magnitude" ? base : `${base}, ${this.#product.id}`;
  }

  #tileLabel(tile: number): string {
    const slice = Math.floor(tile / this.#partitions);
    const parts = [];
    if (this.#slicesPerRow > 1) parts.push(`slice ${slice}`);
    if (this.#partitions > 1) parts.push(`z ${tile % this.#partitions}`);
    return parts.join(" ");
  }

  #rowLabel(row: number): string {
    const { lengths, echoTimesSeconds } = this.#scan.facts;
    const counters = frameCounters(this.#scan.facts, row * this.#slicesPerRow);
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
