import { flow } from "./flow.js";
import { CAP_ROWS, fitText, textSteps } from "./font.js";
import { roundLength, shortNumber } from "./number-text.js";
import type { Levels, Raster } from "./raster.js";

/** One thing in the lines below a picture; `draw` is given its left end and the baseline of its text. */
export interface FooterItem {
  readonly widthPx: number;
  draw(raster: Raster, left: number, baseline: number): void;
}

export interface FooterStyle {
  readonly levels: Levels;
  /** Pixels of one grid step of the font. */
  readonly stepPx: number;
}

/** Distance between the baselines of two footer lines, in steps of the font. */
const LINE_STEPS = 13;
const GAP_STEPS = 12;

/** Plain text, cut where it is wider than `availablePx`. */
export function textItem(text: string, availablePx: number, style: FooterStyle): FooterItem {
  const fitted = fitText(text, availablePx / style.stepPx);
  return {
    widthPx: textSteps(fitted) * style.stepPx,
    draw: (raster, left, baseline) => raster.text(fitted, left, baseline, style),
  };
}

/** A bar of a round number of millimetres, at most `longestPx` long, with its length beside it. */
export function scaleBarItem(pixelMm: number, longestPx: number, style: FooterStyle): FooterItem {
  const lengthMm = roundLength(longestPx * pixelMm);
  const lengthPx = Math.round(lengthMm / pixelMm);
  const label = `${shortNumber(lengthMm)} mm`;
  const { stepPx, levels } = style;
  const labelLeft = lengthPx + 3 * stepPx;
  return {
    widthPx: labelLeft + textSteps(label) * stepPx,
    draw: (raster, left, baseline) => {
      const middle = baseline - Math.ceil((CAP_ROWS * stepPx) / 2);
      raster.fillBox(left, middle - Math.ceil(stepPx / 2), lengthPx, stepPx, levels);
      for (const end of [0, lengthPx - stepPx]) {
        raster.fillBox(left + end, baseline - CAP_ROWS * stepPx, stepPx, CAP_ROWS * stepPx, levels);
      }
      raster.text(label, left + labelLeft, baseline, style);
    },
  };
}

/** Black to white, with the values that they stand for. */
export function greyWedgeItem(low: string, high: string, style: FooterStyle): FooterItem {
  const { stepPx, levels } = style;
  const wedgePx = 40 * stepPx;
  const heightPx = CAP_ROWS * stepPx;
  const wedgeLeft = (textSteps(low) + 4) * stepPx;
  const highLeft = wedgeLeft + wedgePx + 4 * stepPx;
  return {
    widthPx: highLeft + textSteps(high) * stepPx,
    draw: (raster, left, baseline) => {
      raster.text(low, left, baseline, style);
      const top = baseline - heightPx;
      // a thin frame, or the black end would be lost in the margin
      raster.fillBox(left + wedgeLeft - 1, top - 1, wedgePx + 2, heightPx + 2, levels);
      for (let i = 0; i < wedgePx; i++) {
        const grey = Math.round((255 * i) / (wedgePx - 1));
        raster.fillBox(
          left + wedgeLeft + i,
          top,
          1,
          heightPx,
          levels.map(() => grey),
        );
      }
      raster.text(high, left + highLeft, baseline, style);
    },
  };
}

/** Height of a footer of these items within `availablePx`. */
export function footerHeight(items: readonly FooterItem[], availablePx: number, stepPx: number): number {
  const places = flow(
    items.map((item) => item.widthPx),
    GAP_STEPS * stepPx,
    availablePx,
  );
  return ((places.at(-1)?.line ?? -1) + 1) * LINE_STEPS * stepPx;
}

/** Draw the items from `top` on; see `footerHeight`. */
export function drawFooter(
  raster: Raster,
  items: readonly FooterItem[],
  left: number,
  top: number,
  availablePx: number,
  stepPx: number,
): void {
  const places = flow(
    items.map((item) => item.widthPx),
    GAP_STEPS * stepPx,
    availablePx,
  );
  places.forEach((place, i) => {
    const baseline = top + (place.line * LINE_STEPS + CAP_ROWS + 2) * stepPx;
    items[i]?.draw(raster, left + place.left, baseline);
  });
}
