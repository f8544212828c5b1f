import { textSteps } from "./font.js";
import type { SquareSize } from "./square-pixels.js";

export const MARGIN_PX = 12;
/** Room for the scale and the caution, however narrow the images are. */
const LEAST_WIDTH_PX = 280;
/** Distance between two lines of a label, in steps of the font. */
export const LABEL_LINE_STEPS = 12;

/** The sheet of a montage: where each image and its label stand. */
export interface Grid {
  readonly width: number;
  /** Height of all images with their labels. */
  readonly height: number;
  readonly tileWidth: number;
  readonly labelHeight: number;
  readonly labelStepPx: number;
  /** Text size of the title and the footer. */
  readonly stepPx: number;
  readonly titleHeight: number;
  /** Left end and top of an image's label. */
  place(row: number, tile: number): Place;
}

export interface Place {
  readonly left: number;
  readonly top: number;
}

/** Choose the columns whose picture comes nearest to 4 : 3 with few places left empty, and the size of the labels. */
export function planGrid(size: SquareSize, labels: readonly (readonly string[][])[]): Grid {
  const rows = labels.length;
  const tiles = labels[0]?.length ?? 1;
  const lines = Math.max(...labels.flat().map((label) => label.length));
  const widest = Math.max(1, ...labels.flat(2).map(textSteps));
  const labelStepPx = widest * 2 <= size.width ? 2 : 1;
  const labelHeight = lines * LABEL_LINE_STEPS * labelStepPx;
  const pitchX = size.width + MARGIN_PX;
  const pitchY = labelHeight + size.height + MARGIN_PX;

  const score = (columns: number) => {
    const bands = Math.ceil(tiles / columns);
    const aspect = (columns * pitchX) / (bands * rows * pitchY);
    return Math.abs(Math.log(aspect / (4 / 3))) + 2 * (1 - tiles / (bands * columns));
  };
  const columns = Array.from({ length: tiles }, (_, i) => i + 1).reduce((best, each) =>
    score(each) < score(best) ? each : best,
  );
  const width = Math.max(LEAST_WIDTH_PX, columns * pitchX + MARGIN_PX);
  const stepPx = width >= 400 ? 2 : 1;
  const titleHeight = 18 * stepPx;
  return {
    width,
    height: Math.ceil(tiles / columns) * rows * pitchY,
    tileWidth: size.width,
    labelHeight,
    labelStepPx,
    stepPx,
    titleHeight,
    // where the tiles of one row need several lines, the rows of a band stay together
    place: (row, tile) => ({
      left: MARGIN_PX + (tile % columns) * pitchX,
      top: titleHeight + (Math.floor(tile / columns) * rows + row) * pitchY,
    }),
  };
}
