import { CAP_SHARE, type Drawing, type Mark, MM_PER_POINT, type Point } from "./drawing.js";
import { CAP_ROWS, type Stroke } from "./font.js";
import { encodePng, type Picture } from "./png.js";
import { Raster } from "./raster.js";

const WHITE = [255, 255, 255];

/** The drawing as RGB pixels. */
export function drawingRaster(drawing: Drawing, pixelsPerInch: number): Raster {
  const scale = pixelsPerInch / 72;
  const raster = new Raster(
    Math.ceil(drawing.widthPt * scale),
    Math.ceil(drawing.heightPt * scale),
    3,
    WHITE,
  );
  for (const mark of drawing.marks) draw(raster, mark, scale);
  return raster;
}

/** The drawing as a picture, and as a PNG that knows its size on paper. */
export function drawingPng(drawing: Drawing, pixelsPerInch = 300): { picture: Picture; png: Uint8Array } {
  const pixelMm = (72 / pixelsPerInch) * MM_PER_POINT;
  const picture = drawingRaster(drawing, pixelsPerInch).picture();
  const png = encodePng(picture, { pixelMm: { x: pixelMm, y: pixelMm }, texts: { Title: drawing.title } });
  return { picture, png };
}

function draw(raster: Raster, mark: Mark, scale: number): void {
  const levels = levelsOf(mark.colour);
  switch (mark.kind) {
    case "lines": {
      const pieces = mark.dashPt
        ? mark.pieces.flatMap((piece) => dashes(piece, mark.dashPt ?? []))
        : mark.pieces;
      raster.strokes(
        pieces.flatMap((piece) => strokesThrough(piece, scale)),
        mark.widthPt * scale,
        levels,
      );
      return;
    }
    case "dots": {
      const dots = mark.centres.map(([x, y]): Stroke => [x * scale, y * scale, x * scale, y * scale]);
      raster.strokes(dots, 2 * mark.radiusPt * scale, levels);
      return;
    }
    case "text": {
      const stepPx = (mark.sizePt * CAP_SHARE * scale) / CAP_ROWS;
      const { text, anchor, isVertical = false, isBold = false } = mark;
      raster.text(text, mark.at[0] * scale, mark.at[1] * scale, {
        levels,
        stepPx,
        anchor,
        isVertical,
        isBold,
      });
    }
  }
}

function strokesThrough(piece: readonly Point[], scale: number): Stroke[] {
  return piece.slice(1).map(([x1, y1], i): Stroke => {
    const [x0, y0] = piece[i] ?? [x1, y1];
    return [x0 * scale, y0 * scale, x1 * scale, y1 * scale];
  });
}

/** Cut a line into the pieces that a dash pattern draws; `pattern` holds lengths drawn and left out in turn. */
export function dashes(piece: readonly Point[], pattern: readonly number[]): Point[][] {
  const drawn: Point[][] = [];
  let part = 0; // of the pattern; the even ones are drawn
  let left = pattern[0] ?? Infinity;
  let current: Point[] = piece[0] ? [piece[0]] : [];
  for (let i = 1; i < piece.length; i++) {
    let [x, y] = piece[i - 1] ?? [0, 0];
    const [x1, y1] = piece[i] ?? [0, 0];
    let rest = Math.hypot(x1 - x, y1 - y);
    while (rest > left) {
      x += ((x1 - x) * left) / rest;
      y += ((y1 - y) * left) / rest;
      rest -= left;
      if (part % 2 === 0) drawn.push([...current, [x, y]]);
      current = [[x, y]];
      part = (part + 1) % pattern.length;
      left = pattern[part] ?? Infinity;
    }
    left -= rest;
    current.push([x1, y1]);
  }
  if (part % 2 === 0 && current.length > 1) drawn.push(current);
  return drawn;
}

function levelsOf(colour: string): number[] {
  return [1, 3, 5].map((at) => Number.parseInt(colour.slice(at, at + 2), 16));
}
