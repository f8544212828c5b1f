import { chartDrawing } from "./chart.js";
import type { Drawing } from "./drawing.js";
import { stackedDrawings } from "./stacked-drawings.js";

/** A window and its point spread, as they are drawn. */
export interface WindowCurves {
  readonly name: string;
  /** u = k/h and the gain there. */
  readonly u: ArrayLike<number>;
  readonly gains: ArrayLike<number>;
  /** Positions in pixels and the size of the point spread there, 1 at 0. */
  readonly positionsPixels: ArrayLike<number>;
  readonly spread: ArrayLike<number>;
}

/** Below this the point spread is not drawn. */
const FLOOR_DB = -80;

/** Windows above, their point spreads in dB below. */
export function windowDrawing(windows: readonly WindowCurves[]): Drawing {
  const gains = chartDrawing({
    title: "Window",
    x: { label: "k / h", domain: [-1, 1] },
    y: { label: "gain", domain: [0, 1.05] },
    series: windows.map(({ name, u, gains: y }) => ({ name, x: u, y })),
    aspect: 0.38,
  });
  const spreads = chartDrawing({
    title: "Point spread",
    x: { label: "position", unit: "px" },
    y: { label: "level", unit: "dB", domain: [FLOOR_DB, 3] },
    series: windows.map(({ name, positionsPixels, spread }) => ({
      name,
      x: positionsPixels,
      y: Array.from(spread, (value) => Math.max(FLOOR_DB, 20 * Math.log10(Math.max(value, 1e-12)))),
    })),
    aspect: 0.5,
  });
  return stackedDrawings("Windows and their point spreads", [gains, spreads]);
}
