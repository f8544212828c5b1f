import { describe, expect, test } from "vitest";
import { isSameGrid, samePixel, samePlace } from "../../src/engine/same-place.js";
import type { Layout } from "../../src/stages/stage.js";

/** Along x only what matters here differs. */
const along = (length: number, fovMm: number): Layout =>
  ({
    axes: ["coil", "z", "y", "x"],
    shape: [1, 1, 4, length],
    fovMm: { x: fovMm, y: 8, z: 5 },
  }) as unknown as Layout;

describe("the same place", () => {
  test("on a wider field of view with pixels of the same size: as far from the centre, floor(N/2)", () => {
    expect(samePlace(32, "x", along(128, 240), along(256, 480))).toBe(96);
    expect(samePlace(0, "x", along(5, 10), along(8, 16))).toBe(2); // centres 2 and 4
    expect(samePlace(0, "x", along(8, 16), along(5, 10))).toBe(-2);
  });

  test("on a finer matrix over the same field of view: twice as many pixels from the centre", () => {
    expect(samePlace(40, "x", along(64, 128), along(128, 128))).toBe(80);
    expect(samePlace(1.25, "x", along(5, 10), along(10, 10))).toBe(5 + 2 * (1.25 - 2));
  });

  test("on the same grid: the number itself, to the bit", () => {
    expect(samePlace(95.28379672318444, "x", along(128, 240), along(128, 240 * (1 + 1e-12)))).toBe(
      95.28379672318444,
    );
  });

  test("no pixel beyond the ends", () => {
    expect(samePixel(0, "x", along(8, 16), along(5, 10))).toBeUndefined();
    expect(samePixel(2, "x", along(8, 16), along(5, 10))).toBe(0);
    expect(samePixel(7, "x", along(8, 16), along(5, 10))).toBeUndefined();
  });

  test("grids of one matrix are the same only over one field of view", () => {
    expect(isSameGrid(along(128, 240), along(128, 240))).toBe(true);
    expect(isSameGrid(along(128, 240), along(128, 300))).toBe(false);
    expect(isSameGrid(along(128, 240), along(64, 240))).toBe(false);
  });
});
