import { describe, expect, test } from "vitest";
import { UsageError } from "../../src/errors.js";
import { toGrey16 } from "../../src/writers/grey-range.js";
import { type MontageOptions, montage, selectImages } from "../../src/writers/montage.js";
import type { Picture } from "../../src/writers/png.js";
import { pngTexts } from "./png-chunks.js";

const [ROWS, TILES, HEIGHT, WIDTH] = [2, 3, 4, 5];
/** Level of an image: below the margin's and the ink's, so that a level tells which image a pixel is of. */
const levelOf = (row: number, tile: number) => 3 * (row * TILES + tile) + 1;

/** Images of one level each, shown as they are: 0 black, 255 white. */
function flat(options: Partial<MontageOptions> = {}) {
  const imageSize = HEIGHT * WIDTH;
  const values = Float32Array.from({ length: ROWS * TILES * imageSize }, (_, i) => {
    const image = Math.floor(i / imageSize);
    return levelOf(Math.floor(image / TILES), image % TILES);
  });
  return montage({
    values,
    rows: ROWS,
    tiles: TILES,
    height: HEIGHT,
    width: WIDTH,
    pixelMm: { x: 2, y: 2 },
    kind: "magnitude",
    title: "a title",
    tileLabels: ["slice 1", "slice 2", "slice 3"],
    rowLabels: ["echo 1", "echo 2"],
    range: { low: 0, high: 255 },
    ...options,
  });
}

/**
 * Where the image of a level is: its box and its number of pixels. Lines with few such pixels are those of the grey
 * wedge and of smooth text, not of an image, which is above 100 wide here.
 */
function boxOf({ width, pixels }: Picture, level: number) {
  const box = { left: Infinity, top: Infinity, right: -Infinity, bottom: -Infinity, count: 0 };
  for (let y = 0; y * width < pixels.length; y++) {
    const line = pixels.subarray(y * width, (y + 1) * width);
    let count = 0;
    for (const pixel of line) count += Number(pixel === level);
    if (count <= 20) continue;
    box.count += count;
    box.left = Math.min(box.left, line.indexOf(level));
    box.right = Math.max(box.right, line.lastIndexOf(level));
    box.top = Math.min(box.top, y);
    box.bottom = Math.max(box.bottom, y);
  }
  return box;
}

test("every image is whole: labels and bars are beside it, not over it", () => {
  const { picture, pixelMm } = flat();
  for (let row = 0; row < ROWS; row++) {
    for (let tile = 0; tile < TILES; tile++) {
      const { left, top, right, bottom, count } = boxOf(picture, levelOf(row, tile));
      const [width, height] = [right - left + 1, bottom - top + 1];
      expect(count).toBe(width * height);
      // square in millimetres: 5 x 2 mm by 4 x 2 mm
      expect(width * pixelMm.x).toBeCloseTo(10, 10);
      expect(height * pixelMm.y).toBeCloseTo(8, 10);
    }
  }
});

test("tiles stand in the given order, echoes of one tile below one another", () => {
  const order = [2, 0, 1];
  const { picture, shownTiles } = flat({ order });
  expect(shownTiles).toEqual(order);
  const places = order.map((tile) => [0, 1].map((row) => boxOf(picture, levelOf(row, tile))));
  for (const [first, second] of places) {
    expect(second?.left).toBe(first?.left);
    expect(second?.top).toBeGreaterThan(first?.bottom ?? Infinity);
  }
  // reading order: from the left, then downward
  const reading = places.map(([first]) => (first?.top ?? 0) * picture.width + (first?.left ?? 0));
  expect(reading).toEqual([...reading].sort((a, b) => a - b));
  expect(new Set(reading).size).toBe(3);
});

test("x runs to the right and y downward", () => {
  const values = Float32Array.from({ length: 12 }, (_, i) => i); // [3, 4]
  const { picture } = montage({
    values,
    rows: 1,
    tiles: 1,
    height: 3,
    width: 4,
    pixelMm: { x: 1, y: 1 },
    kind: "magnitude",
    title: "",
    range: { low: 0, high: 255 },
  });
  const at = (level: number) => boxOf(picture, level);
  expect(at(1).left).toBe(at(0).right + 1);
  expect(at(1).top).toBe(at(0).top);
  expect(at(4).top).toBe(at(0).bottom + 1);
  expect(at(4).left).toBe(at(0).left);
});

test("pixels that are not square are shown at their true shape", () => {
  const { picture } = flat({ pixelMm: { x: 1, y: 2.5 } });
  const { left, top, right, bottom } = boxOf(picture, levelOf(0, 0));
  // 5 x 1 mm by 4 x 2.5 mm: twice as high as wide
  expect((bottom - top + 1) / (right - left + 1)).toBe(2);
});

test("with 16 bits the values are quantised as finely as that allows", () => {
  const range = { low: 0, high: 40 };
  const { picture } = flat({ bits: 16, range });
  expect(picture.pixels).toBeInstanceOf(Uint16Array);
  const level = toGrey16([levelOf(1, 2)], { ...range, rule: "" })[0] ?? -1;
  const { left, top, right, bottom, count } = boxOf(picture, level);
  expect(count).toBe((right - left + 1) * (bottom - top + 1));
});

describe("of more images than the limit", () => {
  test("all echoes of evenly spaced tiles are shown, the first and the last among them", () => {
    const order = Array.from({ length: 9 }, (_, i) => i);
    expect(selectImages(2, order, 10)).toEqual({ rows: [0, 1], tiles: [0, 2, 4, 6, 8] });
    expect(selectImages(2, [...order].reverse(), 10).tiles).toEqual([8, 6, 4, 2, 0]);
    expect(selectImages(1, order, 64).tiles).toEqual(order);
  });

  test("rows are left out only where they alone are too many, then with the middle tile", () => {
    expect(selectImages(5, [0, 1, 2], 3)).toEqual({ rows: [0, 2, 4], tiles: [1] });
  });

  test.each([1, 2, 3, 7, 63, 64, 65])("never more than %i are", (limit) => {
    for (const [rows, tiles] of [
      [1, 200],
      [3, 50],
      [100, 3],
    ] as const) {
      // biome-ignore format: one line
      const chosen = selectImages(rows, Array.from({ length: tiles }, (_, i) => i), limit); // biome-ignore format: one line
      expect(chosen.rows.length * chosen.tiles.length).toBeLessThanOrEqual(limit);
      expect(new Set(chosen.tiles).size).toBe(chosen.tiles.length);
    }
  });

  test("the others are not in the picture, nor in the range, and the picture says how many there are", () => {
    const { picture, shownTiles, range } = flat({ limit: 4, range: {} });
    expect(shownTiles).toEqual([0, 2]);
    expect(range.high).toBeLessThanOrEqual(levelOf(1, 2));
    const whole = flat();
    const told = flat({ total: 7 });
    expect(Buffer.from(told.picture.pixels).equals(Buffer.from(whole.picture.pixels))).toBe(false);
    expect(picture.pixels.length).toBeGreaterThan(0);
  });
});

describe("the range", () => {
  test("is stated in the file with the title and the true pixel size", () => {
    const { png, pixelMm } = flat({ unit: "a.u.", range: { low: 1, high: 9.5 } });
    expect(pngTexts(png)).toEqual({
      Title: "a title",
      "Grey range": "black 1, white 9.5 a.u.; as given",
      "Pixel size (mm)": `x ${pixelMm.x}, y ${pixelMm.y}`,
      Disclaimer: "Research use only; not for diagnosis.",
    });
  });

  test("may be given at one end only", () => {
    const automatic = flat({ range: {} }).range;
    expect(flat({ range: { low: 3 } }).range).toEqual({ low: 3, high: automatic.high, rule: "as given" });
  });

  test("that is none is a usage error", () => {
    expect(() => flat({ range: { low: 5, high: 5 } })).toThrow(UsageError);
  });
});

test("phases are never mixed: a jump from pi to -pi stays a jump", () => {
  const { picture } = montage({
    values: [Math.PI, -Math.PI],
    rows: 1,
    tiles: 1,
    height: 2,
    width: 1,
    pixelMm: { x: 1, y: 1.3 },
    kind: "phase",
    title: "",
    range: { low: -4, high: 4 },
  });
  // pi is level 228, -pi level 27; any mixture would be near 128
  expect(boxOf(picture, 128).count).toBe(0);
  expect(boxOf(picture, 228).count).toBeGreaterThan(1000);
});

test("values that do not fill the shape are refused, and the same input gives the same pixels", () => {
  expect(() => flat({ tiles: 4 })).toThrow("[2, 4, 4, 5] does not hold 120 values");
  expect(flat().picture.pixels).toEqual(flat().picture.pixels);
});
