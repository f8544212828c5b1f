import { describe, expect, it } from "vitest";
import { maskFromArray, RegionError, regionMask, regionStatistics } from "../../src/kernels/region.js";

const grid = { height: 5, width: 8, pixelHeightMm: 2, pixelWidthMm: 0.1 };

/** Rows of a mask as text, # inside. */
function drawn(mask: Uint8Array, width: number): string[] {
  const text = Array.from(mask, (inside) => (inside ? "#" : ".")).join("");
  return text.match(new RegExp(`.{${width}}`, "g")) ?? [];
}

describe("regionMask", () => {
  it("draws a rectangle of exactly the pixels asked for, odd and even", () => {
    const odd = regionMask(
      { shape: "rectangle", unit: "px", centreX: 3, centreY: 1, width: 3, height: 1 },
      grid,
    );
    expect(drawn(odd, 8)).toEqual(["........", "..###...", "........", "........", "........"]);
    const even = regionMask(
      { shape: "rectangle", unit: "px", centreX: 4, centreY: 2, width: 4, height: 2 },
      grid,
    );
    expect(drawn(even, 8)).toEqual(["........", "..####..", "..####..", "........", "........"]);
  });

  it("counts mm from the pixel at floor(n/2), and does not lose a bound to rounding", () => {
    // 0.1 mm pixels, x = 0 at column 4: -0.3 .. 0.3 mm is columns 1 .. 6. Rows of 2 mm, y = 0 at row 2: -3 .. 1 mm is rows 1, 2.
    const mask = regionMask(
      { shape: "rectangle", unit: "mm", centreX: 0, centreY: -1, width: 0.6, height: 4 },
      grid,
    );
    expect(drawn(mask, 8)).toEqual(["........", ".######.", ".######.", "........", "........"]);
  });

  it("draws an ellipse, rim included, cut at the image's edge", () => {
    const mask = regionMask(
      { shape: "ellipse", unit: "px", centreX: 6, centreY: 2, width: 6, height: 4 },
      grid,
    );
    expect(drawn(mask, 8)).toEqual(["......#.", "....####", "...#####", "....####", "......#."]);
    const disc = regionMask(
      { shape: "ellipse", unit: "mm", centreX: 0, centreY: 0, width: 100, height: 50 },
      { height: 200, width: 200, pixelHeightMm: 1, pixelWidthMm: 1 },
    );
    // Area pi 50 25 = 3927; the count of a lattice is off by less than its circumference, 242, times 1/20.
    expect(Math.abs(disc.reduce((sum, inside) => sum + inside) - Math.PI * 50 * 25)).toBeLessThan(12);
  });

  it.each([
    [{ centreX: 50 }, "holds no pixel"],
    [{ width: 0 }, "a centre of 3 with a size of 0"],
    [{ height: Number.NaN }, "a centre of 2 with a size of NaN"],
    [{ unit: "mm" as const }, "mm need pixel sizes"],
  ])("refuses %j", (wrong, rule) => {
    const region = {
      shape: "ellipse",
      unit: "px",
      centreX: 3,
      centreY: 2,
      width: 4,
      height: 4,
      ...wrong,
    } as const;
    expect(() => regionMask(region, { height: 5, width: 8 })).toThrow(RegionError);
    expect(() => regionMask(region, { height: 5, width: 8 })).toThrow(rule);
  });
});

describe("maskFromArray", () => {
  it("takes what is not 0", () => {
    expect([...maskFromArray([0, 2, -1, 0, 0.5, 0], [2, 3], { height: 2, width: 3 })]).toEqual([
      0, 1, 1, 0, 1, 0,
    ]);
  });

  it.each([
    [[1, 1, 1, 1, 1, 1], [3, 2], "the mask is [3, 2], the image [2, 3]"],
    [[0, 0, 0, 0, 0, 0], [2, 3], "the mask holds no pixel"],
    [[0, 0, Number.NaN, 0, 1, 0], [2, 3], "the mask holds NaN"],
  ])("refuses %j of %j", (values, shape, rule) => {
    expect(() => maskFromArray(values, shape, { height: 2, width: 3 })).toThrow(rule);
  });
});

describe("regionStatistics", () => {
  it("has count, mean and deviation with divisor count - 1", () => {
    const store = Float32Array.of(99, 99, 4, 7, 0, 13, 16);
    const { count, mean, standardDeviation } = regionStatistics(
      store.subarray(2),
      Uint8Array.of(1, 1, 0, 1, 1),
    );
    expect([count, mean]).toEqual([4, 10]);
    expect(standardDeviation).toBeCloseTo(Math.sqrt(30), 14);
    expect(regionStatistics(store, Uint8Array.of(1, 0, 0, 0, 0, 0, 0)).standardDeviation).toBeNaN();
  });
});
