import { describe, expect, test } from "vitest";
import { resample, squareSize } from "../../src/writers/square-pixels.js";

describe("picture size", () => {
  test.each([
    // width, height, mm, wanted -> picture width, height: 128 doubles to 256; 240 of 256 is near enough
    [128, 96, { x: 1, y: 1 }, 256, 256, 192],
    [240, 240, { x: 1, y: 1 }, 256, 240, 240],
    [512, 512, { x: 1, y: 1 }, 256, 512, 512],
    // pixels twice as high as wide: as many lines as the millimetres ask
    [100, 50, { x: 1, y: 2 }, 100, 100, 100],
    // 64 x 1.5 mm and 48 x 2.5 mm: 96 by 120 mm, at 1.5 / 3 mm
    [64, 48, { x: 1.5, y: 2.5 }, 256, 192, 240],
    [5, 7, { x: 1, y: 1 }, 50, 35, 49],
  ])("%i x %i at %o, %i wanted", (width, height, pixelMm, wanted, pictureWidth, pictureHeight) => {
    const size = squareSize(width, height, pixelMm, wanted);
    expect([size.width, size.height]).toEqual([pictureWidth, pictureHeight]);
  });

  test("states exact millimetres, equal in both directions to the rounding of one pixel", () => {
    const size = squareSize(128, 96, { x: 1.875, y: 2.3 }, 256);
    expect(size.pixelMm.x * size.width).toBeCloseTo(128 * 1.875, 10);
    expect(size.pixelMm.y * size.height).toBeCloseTo(96 * 2.3, 10);
    expect(Math.abs(size.pixelMm.y / size.pixelMm.x - 1)).toBeLessThan(0.5 / size.height);
  });
});

describe("resampling [2, 3]", () => {
  const image = [1, 2, 3, 10, 20, 30];
  const sized = (width: number, height: number) => ({ width, height, pixelMm: { x: 1, y: 1 } });

  test("whole factors repeat, also if smooth; x stays x and y stays y", () => {
    const expected = [1, 1, 2, 2, 3, 3, 10, 10, 20, 20, 30, 30];
    expect([...resample(image, 3, 2, sized(6, 2), true)]).toEqual(expected);
    expect([...resample(image, 3, 2, sized(3, 4), true)]).toEqual([1, 2, 3, 1, 2, 3, 10, 20, 30, 10, 20, 30]);
  });

  test("other factors interpolate between centres: 2 to 3 lines puts the middle one half way", () => {
    // centres 0.5, 1.5 of 2 lines against 1/3, 1, 5/3: clamped, half way, clamped
    expect([...resample(image, 3, 2, sized(3, 3), true)]).toEqual([1, 2, 3, 5.5, 11, 16.5, 10, 20, 30]);
  });

  test("or take the nearest, so that no value is made up", () => {
    const nearest = resample(image, 3, 2, sized(4, 3), false);
    expect([...nearest].every((value) => image.includes(value))).toBe(true);
    expect([...nearest].slice(0, 4)).toEqual([1, 2, 2, 3]); // centres at 0.375, 1.125, 1.875, 2.625
  });

  test("NaN stays where it is when pixels are repeated", () => {
    expect([...resample([1, Number.NaN], 2, 1, sized(4, 1), true)]).toEqual([1, 1, Number.NaN, Number.NaN]);
  });
});
