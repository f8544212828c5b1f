import { CAP_ROWS, type Stroke, textSteps, textStrokes } from "./font.js";
import type { Picture } from "./png.js";

/** Levels 0 to 255, one for each channel of the raster. */
export type Levels = readonly number[];

export interface TextStyle {
  readonly levels: Levels;
  /** Pixels of one grid step of the font; a capital is 7 steps high. Whole numbers give the sharpest text. */
  readonly stepPx: number;
  readonly anchor?: "start" | "middle" | "end";
  /** Read upward instead of to the right. */
  readonly isVertical?: boolean;
  readonly isBold?: boolean;
}

/** A drawing surface of 8-bit grey or RGB. Positions are pixels from the top left corner; pixel i spans i to i + 1. */
export class Raster {
  readonly width: number;
  readonly height: number;
  readonly channels: 1 | 3;
  readonly pixels: Uint8Array;

  constructor(width: number, height: number, channels: 1 | 3, background: Levels) {
    this.width = width;
    this.height = height;
    this.channels = channels;
    this.pixels = new Uint8Array(width * height * channels);
    this.fillBox(0, 0, width, height, background);
  }

  /** Fill whole pixels; parts outside are left out. */
  fillBox(left: number, top: number, width: number, height: number, levels: Levels): void {
    const { x0, x1, y0, y1 } = this.#inside(left, top, left + width, top + height);
    for (let y = y0; y < y1; y++) {
      if (this.channels === 1) this.pixels.fill(levels[0] ?? 0, y * this.width + x0, y * this.width + x1);
      else
        for (let x = x0, at = 3 * (y * this.width + x0); x < x1; x++, at += 3) {
          this.pixels[at] = levels[0]!;
          this.pixels[at + 1] = levels[1]!;
          this.pixels[at + 2] = levels[2]!;
        }
    }
  }

  /** Draw smooth strokes with round ends, as one: where they overlap, none is drawn twice. */
  strokes(strokes: readonly Stroke[], widthPx: number, levels: Levels): void {
    if (strokes.length === 0) return;
    const reach = widthPx / 2 + 0.5; // the coverage of a pixel falls from 1 to 0 across the edge
    const box = this.#inside(...bounds(strokes, reach));
    const columns = box.x1 - box.x0;
    const coverage = new Float32Array(Math.max(0, columns * (box.y1 - box.y0)));
    for (const stroke of strokes) {
      const own = this.#inside(...bounds([stroke], reach));
      for (let y = own.y0; y < own.y1; y++) {
        for (let x = own.x0; x < own.x1; x++) {
          const at = (y - box.y0) * columns + x - box.x0;
          const covered = Math.min(1, reach - distance(x + 0.5, y + 0.5, stroke));
          if (covered > (coverage[at] ?? 1)) coverage[at] = covered;
        }
      }
    }
    for (let at = 0; at < coverage.length; at++) {
      const share = coverage[at] ?? 0;
      if (share > 0) this.#blend(box.x0 + (at % columns), box.y0 + Math.floor(at / columns), levels, share);
    }
  }

  /** Write a line of text whose baseline starts (or is centred, or ends) at x, y. */
  text(text: string, x: number, y: number, style: TextStyle): void {
    const { stepPx, levels, anchor = "start", isVertical = false, isBold = false } = style;
    const share = anchor === "start" ? 0 : anchor === "middle" ? 0.5 : 1;
    const start = -textSteps(text) * stepPx * share;
    const strokes = textStrokes(text).map(([x0, y0, x1, y1]): Stroke => {
      const along = [start + x0 * stepPx, start + x1 * stepPx] as const;
      const down = [(y0 - CAP_ROWS) * stepPx, (y1 - CAP_ROWS) * stepPx] as const;
      if (isVertical) return [x + down[0], y - along[0], x + down[1], y - along[1]];
      return [x + along[0], y + down[0], x + along[1], y + down[1]];
    });
    this.strokes(strokes, stepPx * (isBold ? 1.4 : 1), levels);
  }

  picture(): Picture {
    const { width, height, pixels } = this;
    return { width, height, colour: this.channels === 3 ? "rgb" : "grey", pixels };
  }

  /** Pixels that a box touches, cut to the raster. */
  #inside(left: number, top: number, right: number, bottom: number) {
    return {
      x0: Math.max(0, Math.floor(left)),
      y0: Math.max(0, Math.floor(top)),
      x1: Math.min(this.width, Math.ceil(right)),
      y1: Math.min(this.height, Math.ceil(bottom)),
    };
  }

  #blend(x: number, y: number, levels: Levels, share: number): void {
    const at = (y * this.width + x) * this.channels;
    for (let channel = 0; channel < this.channels; channel++) {
      const below = this.pixels[at + channel] ?? 0;
      this.pixels[at + channel] = Math.round(below + ((levels[channel] ?? 0) - below) * share);
    }
  }
}

/** The box around strokes, widened by `reach`: left, top, right, bottom. */
function bounds(strokes: readonly Stroke[], reach: number): [number, number, number, number] {
  const box: [number, number, number, number] = [Infinity, Infinity, -Infinity, -Infinity];
  for (const [x0, y0, x1, y1] of strokes) {
    box[0] = Math.min(box[0], x0 - reach, x1 - reach);
    box[1] = Math.min(box[1], y0 - reach, y1 - reach);
    box[2] = Math.max(box[2], x0 + reach, x1 + reach);
    box[3] = Math.max(box[3], y0 + reach, y1 + reach);
  }
  return box;
}

/** Distance of a point from a stroke's middle line. */
function distance(x: number, y: number, [x0, y0, x1, y1]: Stroke): number {
  const dx = x1 - x0;
  const dy = y1 - y0;
  const lengthSquared = dx * dx + dy * dy;
  const along = lengthSquared === 0 ? 0 : ((x - x0) * dx + (y - y0) * dy) / lengthSquared;
  const nearest = Math.max(0, Math.min(1, along));
  const across = x - x0 - nearest * dx;
  const down = y - y0 - nearest * dy;
  return Math.sqrt(across * across + down * down); // Math.hypot takes several times as long, and nothing overflows here
}
