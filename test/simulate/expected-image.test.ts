import { expect, test } from "vitest";
import { expectedImage } from "../../src/simulate/index.js";

test("a disc of intensity 1 has the level 1, in its place", () => {
  const n = 64;
  const { shape, axes, coilImages, rootSumOfSquares } = expectedImage({
    phantom: "disc",
    matrix: { x: n, y: n },
    coils: 1,
    slices: 1,
  });
  expect(axes).toEqual(["contrast", "slice", "coil", "y", "x"]);
  expect(shape).toEqual([1, 1, 1, n, n]);
  let inside = 0;
  let count = 0;
  for (let y = 0; y < n; y++)
    for (let x = 0; x < n; x++) {
      const distance = Math.hypot(x - n / 2, y - n / 2) / (n / 4); // in radii
      const value = rootSumOfSquares[y * n + x] ?? Number.NaN;
      // Truncation ripples have died to a few per cent half a radius away from the rim.
      if (distance > 1.5) expect(value).toBeLessThan(0.03);
      if (distance > 0.6) continue;
      expect(Math.abs(value - 1)).toBeLessThan(0.06);
      inside += coilImages[2 * (y * n + x)] ?? Number.NaN;
      count++;
    }
  expect(inside / count).toBeCloseTo(1, 2); // ripples of both signs cancel
});

test("coils share one object: their root sum of squares at the centre is that of one coil", () => {
  const options = { phantom: "disc", matrix: { x: 33, y: 31 }, slices: 1 } as const;
  const center = 15 * 33 + 16;
  const single = expectedImage({ ...options, coils: 1 }).rootSumOfSquares[center] ?? Number.NaN;
  const several = expectedImage({ ...options, coils: 4 }).rootSumOfSquares[center] ?? Number.NaN;
  // Sensitivities weigh the ripples a little differently; without normalisation the ratio would be 2.
  expect(Math.abs(several / single - 1)).toBeLessThan(0.02);
});
