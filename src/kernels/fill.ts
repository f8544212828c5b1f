/**
 * Extend a map from its known pixels over the whole grid by pull and push: means of the known pixels on ever coarser
 * grids, then back down, each unknown pixel interpolated from the next coarser grid. Smooth far from the data,
 * continuous at its edge, known pixels unchanged.
 *
 * Source: Gortler, Grzeszczuk, Szeliski, Cohen 1996, Proc SIGGRAPH 43 (pull-push algorithm).
 * @param values [rows, columns]; overwritten where not known
 * @param known  1 where the value holds, [rows, columns]; with no known pixel at all the map becomes 0
 */
export function fillUnknown(
  values: Float32Array,
  known: ArrayLike<number>,
  rows: number,
  columns: number,
): void {
  const weights = Float32Array.from(known, (flag) => (flag ? 1 : 0));
  for (let i = 0; i < values.length; i++) if (weights[i] === 0) values[i] = 0;
  fillLevel(values, weights, rows, columns);
}

/** `weights` in [0, 1] says how far a pixel is known; the rest comes from the coarser grid. */
function fillLevel(values: Float32Array, weights: Float32Array, rows: number, columns: number): void {
  if (rows === 1 && columns === 1) return;
  const [coarseRows, coarseColumns] = [Math.ceil(rows / 2), Math.ceil(columns / 2)];
  const coarse = new Float32Array(coarseRows * coarseColumns);
  const coarseWeights = new Float32Array(coarse.length);
  for (let y = 0, i = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++, i++) {
      const to = (y >> 1) * coarseColumns + (x >> 1);
      coarse[to]! += weights[i]! * values[i]!;
      coarseWeights[to]! += weights[i]!;
    }
  }
  for (let i = 0; i < coarse.length; i++) {
    if (coarseWeights[i]! > 0) coarse[i]! /= coarseWeights[i]!;
    coarseWeights[i] = Math.min(1, coarseWeights[i]!);
  }
  fillLevel(coarse, coarseWeights, coarseRows, coarseColumns);
  for (let y = 0, i = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++, i++) {
      const weight = weights[i]!;
      if (weight === 1) continue;
      const guess = between(coarse, coarseRows, coarseColumns, y / 2 - 0.25, x / 2 - 0.25);
      values[i] = weight * values[i]! + (1 - weight) * guess;
    }
  }
}

/**
 * Value of a map between its pixels: bilinear, the edge pixels continued outwards.
 * @param map [rows, columns]
 * @param y row index, any real number
 * @param x column index, any real number
 */
export function between(map: ArrayLike<number>, rows: number, columns: number, y: number, x: number): number {
  const row = Math.min(rows - 1, Math.max(0, y));
  const column = Math.min(columns - 1, Math.max(0, x));
  const top = Math.min(rows - 1, Math.floor(row));
  const left = Math.min(columns - 1, Math.floor(column));
  const [down, right] = [Math.min(rows - 1, top + 1), Math.min(columns - 1, left + 1)];
  const [v, u] = [row - top, column - left];
  const upper = map[top * columns + left]! * (1 - u) + map[top * columns + right]! * u;
  const lower = map[down * columns + left]! * (1 - u) + map[down * columns + right]! * u;
  return upper * (1 - v) + lower * v;
}
