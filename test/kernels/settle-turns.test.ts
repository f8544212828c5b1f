import { describe, expect, it } from "vitest";
import { settleTurns } from "../../src/kernels/settle-turns.js";
import { wrapped } from "../../src/kernels/unwrap.js";

/** Phases of a straight slope, wrapped, on two parts of a volume with a gap between them. */
function settled(
  slices: number,
  rows: number,
  columns: number,
  slope: (x: number, y: number, z: number) => number,
) {
  const truth = new Float64Array(slices * rows * columns);
  const mask = new Uint8Array(truth.length);
  for (let i = 0; i < truth.length; i++) {
    const [x, y, z] = [i % columns, Math.floor(i / columns) % rows, Math.floor(i / (rows * columns))];
    truth[i] = slope(x, y, z);
    mask[i] = x < columns / 2 || x > columns - 3 ? 1 : 0;
  }
  const found = settleTurns(truth.map(wrapped), mask, { slices, rows, columns });
  const off = Math.round((found[0]! - truth[0]!) / (2 * Math.PI)) * 2 * Math.PI; // of the largest part: nobody can say
  return found.reduce(
    (most, value, i) => (mask[i] ? Math.max(most, Math.abs(value - truth[i]! - off)) : most),
    0,
  );
}

describe("settleTurns", () => {
  it.each([
    [1, 24, 40],
    [1, 2048, 16],
    [1, 8192, 16], // one pixel in sixteen: as many as there are columns
    [6, 20, 30],
  ])("continues a slope across a gap: %d slices of %d x %d", (slices, rows, columns) => {
    expect(settled(slices, rows, columns, (x, y, z) => 1.3 * x + 0.002 * y - 0.9 * z)).toBeLessThan(1e-6);
    expect(settled(slices, rows, columns, (x, y, z) => -2.1 * x - 0.003 * y + 0.4 * z)).toBeLessThan(1e-6);
  });
});
