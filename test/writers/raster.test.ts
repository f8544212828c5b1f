import { describe, expect, test } from "vitest";
import { CAP_ROWS, fitText, textSteps, textStrokes } from "../../src/writers/font.js";
import { Raster } from "../../src/writers/raster.js";

const PRINTABLE = Array.from({ length: 94 }, (_, i) => String.fromCharCode(33 + i));

/** Black strokes on white: the area that they cover, in pixels. */
function coveredArea(raster: Raster): number {
  return raster.pixels.reduce((sum, level) => sum + (255 - level) / 255, 0);
}

describe("the font", () => {
  test("has every printable ASCII character, and no two look alike but O and 0", () => {
    const shapes = PRINTABLE.filter((character) => !"`O".includes(character)).map((c) =>
      JSON.stringify(textStrokes(c)),
    );
    expect(new Set(shapes).size).toBe(shapes.length);
    expect(shapes.filter((shape) => shape === JSON.stringify(textStrokes("?")))).toHaveLength(1);
  });

  test.each([..."°µ±×²−πΔ"])("has %s", (character) => {
    expect(textStrokes(character)).not.toEqual(textStrokes("?"));
  });

  test("stays within 5 columns, and 7 rows above and 2 below the baseline", () => {
    for (const character of PRINTABLE) {
      for (const [x0, y0, x1, y1] of textStrokes(character)) {
        expect(Math.min(x0, x1, y0, y1)).toBeGreaterThanOrEqual(0.5);
        expect(Math.max(x0, x1)).toBeLessThanOrEqual(4.5);
        expect(Math.max(y0, y1)).toBeLessThanOrEqual(CAP_ROWS + 1.5);
      }
    }
  });

  test("digits are all as wide, accents are dropped, and what is lacking is a question mark", () => {
    expect(new Set([..."0123456789"].map(textSteps))).toEqual(new Set([5]));
    expect(textStrokes("é")).toEqual(textStrokes("e"));
    expect(textStrokes("頭")).toEqual(textStrokes("?"));
  });

  test("text is cut to a width, with dots where something is lost", () => {
    expect(fitText("slice 12", textSteps("slice 12"))).toBe("slice 12");
    const cut = fitText("slice 12", textSteps("slice 12") - 1);
    expect(cut).toMatch(/^sli.*\.\.$/);
    expect(textSteps(cut)).toBeLessThan(textSteps("slice 12"));
    expect(fitText("slice", 1)).toBe("");
  });
});

describe("strokes", () => {
  // length 50 by width 3 and two half discs; 1 %: a pixel's coverage is taken from one distance
  test.each([0, 0.3, 1, Math.PI / 2, 2.5])("cover length times width at an angle of %f rad", (angle) => {
    const raster = new Raster(80, 80, 1, [255]);
    const [dx, dy] = [25 * Math.cos(angle), 25 * Math.sin(angle)];
    raster.strokes([[40 - dx, 40 - dy, 40 + dx, 40 + dy]], 3, [0]);
    const expected = 50 * 3 + Math.PI * 1.5 ** 2;
    expect(Math.abs(coveredArea(raster) / expected - 1)).toBeLessThan(0.01);
  });

  test("that overlap are not drawn twice", () => {
    const once = new Raster(20, 20, 1, [255]);
    const twice = new Raster(20, 20, 1, [255]);
    once.strokes([[2, 3, 15, 9]], 2, [0]);
    twice.strokes([[2, 3, 15, 9], [15, 9, 2, 3]], 2, [0]); // biome-ignore format: one line
    expect(twice.pixels).toEqual(once.pixels);
  });

  test("outside the raster are left out", () => {
    const raster = new Raster(10, 10, 3, [255, 255, 255]);
    raster.strokes([[-50, -5, -20, -5], [30, 30, 40, 90]], 2, [0, 0, 0]); // biome-ignore format: one line
    expect(coveredArea(raster)).toBe(0);
  });

  test("blend each channel between paper and ink", () => {
    const raster = new Raster(3, 1, 3, [255, 255, 255]);
    // one pixel wide, from the middle of pixel 0 on: pixel 1 is covered whole
    raster.strokes([[0, 0.5, 3, 0.5]], 1, [10, 20, 30]);
    expect([...raster.pixels.subarray(3, 6)]).toEqual([10, 20, 30]);
  });
});

describe("text", () => {
  const inkBox = (raster: Raster) => {
    const inked = [...raster.pixels.keys()].filter((at) => (raster.pixels[at] ?? 255) < 128);
    const columns = inked.map((at) => at % raster.width);
    const rows = inked.map((at) => Math.floor(at / raster.width));
    return [Math.min(...columns), Math.min(...rows), Math.max(...columns), Math.max(...rows)];
  };

  test("stands on its baseline, a capital 7 steps high: H at 2 pixels a step", () => {
    const raster = new Raster(40, 40, 1, [255]);
    raster.text("H", 10, 30, { levels: [0], stepPx: 2 });
    expect(inkBox(raster)).toEqual([10, 16, 19, 29]);
  });

  test("ends or is centred where it is told, and reads upward if vertical", () => {
    const draw = (anchor: "middle" | "end", isVertical: boolean) => {
      const raster = new Raster(40, 40, 1, [255]);
      raster.text("H", 20, 20, { levels: [0], stepPx: 2, anchor, isVertical });
      return inkBox(raster);
    };
    expect(draw("end", false)).toEqual([10, 6, 19, 19]);
    expect(draw("middle", false)).toEqual([15, 6, 24, 19]);
    expect(draw("end", true)).toEqual([6, 20, 19, 29]);
  });
});
