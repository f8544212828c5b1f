import { readoutBandwidthHz } from "../physics/bandwidth.js";
import { FRAME_AXES, frameCount } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import type { OutputSettings } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { montage, selectImages } from "../writers/montage.js";
import { profilePlot } from "../writers/profile-plot.js";
import { frameCounters, type Plan, pixelSizeMm } from "./plan.js";
import type { Product } from "./products.js";
import type { Scan } from "./scan.js";

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
  readonly #values: Float32Array;
  readonly #partitions: number;

  constructor(
    private readonly file: string,
    private readonly facts: ScanFacts,
    private readonly plan: Plan,
    private readonly settings: OutputSettings,
    private readonly product: Product,
  ) {
    const { lengths } = facts;
    this.#partitions = axisLength(plan.result, "z");
    const rows = frameCount(lengths) / lengths.slice;
    const tiles = Array.from({ length: lengths.slice * this.#partitions }, (_, tile) => tile);
    this.#totalImages = rows * tiles.length;
    const limit = facts.dimensions === 1 ? PROFILE_LINES : settings.tileLimit;
    const shown = selectImages(rows, tiles, limit);
    this.#rows = shown.rows;
    this.#tiles = shown.tiles;
    this.#values = new Float32Array(shown.rows.length * shown.tiles.length * this.#imageSize);
  }

  get #imageSize(): number {
    return axisLength(this.plan.result, "y") * axisLength(this.plan.result, "x");
  }

  /** @param values the real values of one frame, [z, y, x] */
  add(frame: number, values: Float32Array): void {
    const { slice: slices } = this.facts.lengths;
    const row = this.#rows.indexOf(Math.floor(frame / slices));
    if (row < 0) return;
    const slice = frame % slices;
    for (let z = 0; z < this.#partitions; z++) {
      const tile = this.#tiles.indexOf(slice * this.#partitions + z);
      if (tile < 0) continue;
      const image = values.subarray(z * this.#imageSize, (z + 1) * this.#imageSize);
      this.#values.set(image, (row * this.#tiles.length + tile) * this.#imageSize);
    }
  }

  /** The finished picture, and what the sidecar says of it. @param scan what the whole file turned out to be */
  draw(scan: Scan): { name: string; png: Uint8Array; pixels: Uint8Array | Uint16Array; record: object } {
    return this.facts.dimensions === 1 ? this.#drawProfiles() : this.#drawMontage(scan);
  }

  #drawMontage(scan: Scan) {
    const { stem, picture: kind } = this.product;
    const { greyLow, greyHigh } = this.settings;
    const place = (tile: number) => scan.facts.sliceOrder.indexOf(Math.floor(tile / this.#partitions));
    const order = this.#tiles
      .map((_, t) => t)
      .sort((a, b) => place(this.#tiles[a]!) - place(this.#tiles[b]!) || a - b);
    const pixelMm = pixelSizeMm(this.plan.result);
    const given = kind === "magnitude" && (greyLow !== undefined || greyHigh !== undefined);
    const drawn = montage({
      values: this.#values,
      rows: this.#rows.length,
      tiles: this.#tiles.length,
      height: axisLength(this.plan.result, "y"),
      width: axisLength(this.plan.result, "x"),
      pixelMm,
      kind: kind!,
      title: this.#title(),
      order,
      tileLabels: this.#tiles.map((tile) => this.#tileLabel(tile)),
      rowLabels: this.#rows.map((row) => this.#rowLabel(row)),
      total: this.#totalImages,
      limit: this.#rows.length * this.#tiles.length,
      bits: this.settings.pngBits,
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
    return { name: `${stem}.png`, png: drawn.png, pixels: drawn.picture.pixels, record };
  }

  #drawProfiles() {
    const { stem } = this.product;
    const count = axisLength(this.plan.result, "x");
    const lines = this.#rows.flatMap((row, r) =>
      this.#tiles.map((tile, t) => ({
        label: [this.#rowLabel(row), this.#tileLabel(tile)].filter(Boolean).join(", "),
        values: this.#values.subarray(
          (r * this.#tiles.length + t) * count,
          (r * this.#tiles.length + t + 1) * count,
        ),
      })),
    );
    const { encoded, dwellSeconds } = this.facts;
    const drawn = profilePlot({
      lines,
      pixelMm: pixelSizeMm(this.plan.result).x,
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
    if (this.facts.lengths.slice > 1) parts.push(`slice ${slice}`);
    if (this.#partitions > 1) parts.push(`z ${tile % this.#partitions}`);
    return parts.join(" ");
  }

  #rowLabel(row: number): string {
    const { lengths, echoTimesSeconds } = this.facts;
    const counters = frameCounters(this.facts, row * this.facts.lengths.slice);
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
