import fc from "fast-check";
import { XMLValidator } from "fast-xml-parser";
import { PNG } from "pngjs";
import { describe, expect, test } from "vitest";
import { type Chart, chartDrawing, chartPng, chartSvg } from "../../src/writers/chart.js";
import { axisDomain, placeAxis, tickLabel, ticksThatFit } from "../../src/writers/chart-axis.js";
import { textWidth } from "../../src/writers/chart-frame.js";
import { clipLine } from "../../src/writers/clip.js";
import type { Mark } from "../../src/writers/drawing.js";
import { dashes } from "../../src/writers/drawing-raster.js";
import { profileChart, profilePlot } from "../../src/writers/profile-plot.js";
import { pngChunks, pngTexts } from "./png-chunks.js";

type Text = Extract<Mark, { kind: "text" }>;
type Lines = Extract<Mark, { kind: "lines" }>;

const CHART: Chart = {
  title: 'shift <&> "bandwidth"',
  x: { label: "bandwidth per pixel", unit: "Hz" },
  y: { label: "shift", unit: "pixels" },
  series: [
    { name: "1.5 T", x: [0, 100, 200, 300], y: [4, 2, 1, 0.5] },
    { name: "3 T", x: [0, 100, 200, 300], y: [8, 4, 2, 1], mark: "both" },
  ],
};

const texts = (chart: Chart) =>
  chartDrawing(chart).marks.filter((mark): mark is Text => mark.kind === "text");
const lines = (chart: Chart) =>
  chartDrawing(chart).marks.filter((mark): mark is Lines => mark.kind === "lines");

/** The box of a text in points, by the widths of the built-in font. */
function boxOf({ text, at: [x, y], anchor, sizePt, isVertical }: Text) {
  const length = textWidth(text, sizePt);
  const before = anchor === "start" ? 0 : anchor === "middle" ? length / 2 : length;
  const [up, down] = [0.72 * sizePt, 0.2 * sizePt];
  if (isVertical) return { left: x - up, right: x + down, top: y - (length - before), bottom: y + before };
  return { left: x - before, right: x - before + length, top: y - up, bottom: y + down };
}

describe("the layout", () => {
  // thousandths times a power of ten: also 0, negative numbers, and spans that need an exponent
  const number = fc
    .tuple(fc.integer({ min: -9999, max: 9999 }), fc.integer({ min: -9, max: 6 }))
    .map(([thousandths, power]) => (thousandths / 1000) * 10 ** power);
  const anyChart = fc
    .record({
      points: fc.array(fc.tuple(number, number), { minLength: 0, maxLength: 6 }),
      xScale: fc.constantFrom("linear" as const, "log" as const),
      yScale: fc.constantFrom("linear" as const, "log" as const),
      names: fc.array(fc.constantFrom("water", "fat", "a rather long name of a series", "long ".repeat(30)), {
        minLength: 1,
        maxLength: 5,
      }),
      perX: fc.constantFrom(undefined, 203.5, -0.01),
      widthMm: fc.constantFrom(85, 120, 170),
      label: fc.constantFrom("signal", "a label that is longer than its axis ".repeat(3)),
    })
    .map(({ points, xScale, yScale, names, perX, widthMm, label }): Chart => {
      const x = points.map(([value]) => value);
      const y = points.map(([, value]) => value);
      return {
        title: `any ${label}`,
        widthMm,
        x: { label, unit: "mm", scale: xScale },
        y: { label, scale: yScale },
        ...(perX && xScale === "linear" && { top: { label: "frequency", unit: "Hz", perX } }),
        series: names.map((name) => ({ name, x, y, mark: "both" as const })),
      };
    });

  test("no text leaves the picture or touches another, whatever the numbers", () => {
    const check = (chart: Chart) => {
      const { widthPt, heightPt } = chartDrawing(chart);
      const boxes = texts(chart).map((text) => ({ name: text.text, ...boxOf(text) }));
      boxes.forEach((box, i) => {
        expect([box.name, box.left >= 0 && box.top >= 0]).toEqual([box.name, true]);
        expect([box.name, box.right <= widthPt && box.bottom <= heightPt]).toEqual([box.name, true]);
        for (const other of boxes.slice(i + 1)) {
          const isApart =
            box.right <= other.left ||
            other.right <= box.left ||
            box.bottom <= other.top ||
            other.bottom <= box.top;
          expect([box.name, other.name, isApart]).toEqual([box.name, other.name, true]);
        }
      });
    };
    fc.assert(fc.property(anyChart, check), { numRuns: 300, seed: 1 });
  });

  test("no line leaves the picture, and every coordinate is a number", () => {
    const check = (chart: Chart) => {
      const { widthPt, heightPt } = chartDrawing(chart);
      for (const [x, y] of lines(chart).flatMap((mark) => mark.pieces.flat())) {
        expect(x >= 0 && x <= widthPt && y >= 0 && y <= heightPt).toBe(true);
      }
      expect(chartSvg(chart)).not.toMatch(/NaN|Infinity|undefined/);
    };
    fc.assert(fc.property(anyChart, check), { numRuns: 100, seed: 2 });
  });

  test("labels of a column chart are at least 6 points high", () => {
    expect(chartDrawing(CHART).widthPt).toBeCloseTo((85 / 25.4) * 72, 10);
    expect(Math.min(...texts(CHART).map((text) => text.sizePt))).toBeGreaterThanOrEqual(6);
  });

  test("names units, title, series and the caution", () => {
    const said = texts(CHART).map((text) => text.text);
    for (const part of ["bandwidth per pixel (Hz)", "shift (pixels)", "1.5 T", "3 T", CHART.title]) {
      expect(said).toContain(part);
    }
    expect(said.at(-1)).toBe("Research use only; not for diagnosis.");
    expect(texts({ ...CHART, note: "6 of 9 lines shown." }).at(-1)?.text).toMatch(
      /^6 of 9 lines shown\. Research/,
    );
  });

  test("a series whose x and y differ in number is refused", () => {
    const series = [{ name: "a", x: [1, 2], y: [1] }];
    expect(() => chartDrawing({ ...CHART, series })).toThrow("a: 2 x values, 1 y values");
  });

  test("series are told apart without colour, by their dashes", () => {
    const series = Array.from({ length: 4 }, (_, i) => ({ name: `s${i}`, x: [0, 1], y: [0, i] }));
    const drawn = lines({ ...CHART, series }).slice(-4);
    expect(new Set(drawn.map((mark) => JSON.stringify(mark.dashPt))).size).toBe(4);
    expect(new Set(drawn.map((mark) => mark.colour)).size).toBe(4);
  });
});

describe("SVG", () => {
  test("is well-formed, of true size, with real text", () => {
    const svg = chartSvg(CHART);
    expect(XMLValidator.validate(svg)).toBe(true);
    expect(svg).toContain('width="85mm"');
    expect(svg).toContain(">shift &lt;&amp;&gt; &quot;bandwidth&quot;</text>");
    expect(svg).toMatch(/<text [^>]*>bandwidth per pixel \(Hz\)<\/text>/);
  });

  test("leaves out characters that XML forbids", () => {
    expect(XMLValidator.validate(chartSvg({ ...CHART, title: "a\u0000b\u0008" }))).toBe(true);
    expect(chartSvg({ ...CHART, title: "a\u0000b" })).toContain(">ab</text>");
  });
});

describe("PNG", () => {
  test("shows the same as the SVG: the line's colour where the line is", () => {
    const pixelsPerInch = 150;
    const read = PNG.sync.read(Buffer.from(chartPng(CHART, pixelsPerInch).png));
    const [first] = lines(CHART).slice(-2); // the second series has points on top
    const [x, y] = first?.pieces[0]?.[1] ?? [0, 0];
    expect(chartSvg(CHART)).toContain(`${Math.round(x * 100) / 100},${Math.round(y * 100) / 100}`);
    const scale = pixelsPerInch / 72;
    const at = 4 * (Math.floor(y * scale) * read.width + Math.floor(x * scale));
    expect([...read.data.subarray(at, at + 3)]).toEqual([0x00, 0x72, 0xb2]);
  });

  test("knows its title and its size on paper", () => {
    const { png } = chartPng(CHART, 300);
    expect(pngTexts(png).Title).toBe(CHART.title);
    const physical = pngChunks(png).find((chunk) => chunk.type === "pHYs");
    expect(physical?.data.readUInt32BE(0)).toBe(11811); // 300 pixels an inch / 0.0254 m
    expect(pngChunks(png)[0]?.data.readUInt32BE(0)).toBe(1004); // 85 mm at 300 an inch, 1003.9, to whole pixels
  });
});

describe("axes", () => {
  test("places are those of the plain formulas", () => {
    const linear = placeAxis({ label: "" }, [-10, 30], 100, 500);
    expect([linear.place(-10), linear.place(0), linear.place(30)]).toEqual([100, 200, 500]);
    const log = placeAxis({ label: "", scale: "log" }, [1, 1000], 0, 300);
    expect(log.place(10)).toBeCloseTo(100, 9);
    expect([log.place(0), log.place(-1), linear.place(Number.POSITIVE_INFINITY)]).toEqual([NaN, NaN, NaN]);
  });

  test("domains: from the data, from 0 where near, never empty, what cannot be shown left out", () => {
    const label = "";
    expect(axisDomain({ label }, [3, 97], false)).toEqual([0, 100]);
    expect(axisDomain({ label }, [90, 97], false)).toEqual([90, 97]);
    expect(axisDomain({ label }, [3, Number.NaN, 97], true)).toEqual([3, 97]);
    expect(axisDomain({ label }, [5, 5], true)).toEqual([2.5, 7.5]);
    expect(axisDomain({ label }, [], true)).toEqual([0, 1]);
    // spans that doubles cannot divide into ticks
    const [low, high] = axisDomain({ label }, [1, 1 + 2 ** -52], true);
    expect([low, high].map((end) => end.toFixed(9))).toEqual(["0.500000000", "1.500000000"]);
    expect(axisDomain({ label }, [0, 5e-324], false)).toEqual([-1, 1]);
    expect(axisDomain({ label, scale: "log" }, [-3, 0, 0.2, 70], false)).toEqual([0.1, 100]);
    expect(axisDomain({ label, domain: [-80, 5] }, [1], false)).toEqual([-80, 5]);
  });

  test("labels have the decimals of their step, and a true minus sign", () => {
    expect([tickLabel(-0.5, 0.5), tickLabel(0, 0.5), tickLabel(20000, 5000)]).toEqual([
      "−0.5",
      "0.0",
      "20000",
    ]);
    expect([tickLabel(2e6, 1e6), tickLabel(-5e-6, 5e-6), tickLabel(0, 1e-6)]).toEqual(["2e6", "−5e−6", "0"]);
  });

  test("a logarithmic axis labels powers of ten, all exact", () => {
    const labels = ticksThatFit("log", [0.001, 1000], 6, () => true).filter((tick) => tick.label !== "");
    expect(labels.map((tick) => tick.value)).toEqual([0.001, 0.01, 0.1, 1, 10, 100, 1000]);
    expect(labels.map((tick) => tick.label)).toEqual(["0.001", "0.01", "0.1", "1", "10", "100", "1000"]);
  });
});

describe("clipping", () => {
  const box = { left: 0, top: 0, right: 10, bottom: 10 };

  test("cuts at the sides, in closed form", () => {
    expect(clipLine([[-5, 5], [5, 5]], box)).toEqual([[[0, 5], [5, 5]]]); // biome-ignore format: one line
    expect(clipLine([[-5, -10], [20, 15]], box)).toEqual([[[5, 0], [10, 5]]]); // biome-ignore format: one line
    expect(clipLine([[-5, 12], [5, 12]], box)).toEqual([]); // biome-ignore format: one line
  });

  test("keeps a line inside in one piece, and breaks it at NaN and where it leaves", () => {
    expect(clipLine([[1, 1], [2, 3], [4, 4]], box)).toEqual([[[1, 1], [2, 3], [4, 4]]]); // biome-ignore format: one line
    expect(clipLine([[1, 1], [2, 2], [3, NaN], [4, 4], [5, 5]], box)).toHaveLength(2); // biome-ignore format: one line
    expect(clipLine([[1, 5], [1, 15], [3, 15], [3, 5]], box)).toEqual([[[1, 5], [1, 10]], [[3, 10], [3, 5]]]); // biome-ignore format: one line
  });
});

test("dashes follow a line round its corners: 3 drawn and 1 left out along 5 and 5", () => {
  const drawn = dashes([[0, 0], [5, 0], [5, 5]], [3, 1]); // biome-ignore format: one line
  expect(drawn).toEqual([[[0, 0], [3, 0]], [[4, 0], [5, 0], [5, 2]], [[5, 3], [5, 5]]]); // biome-ignore format: one line
});

describe("a profile", () => {
  const options = { title: "p", pixelMm: 2, lines: [{ label: "a", values: [1, 2, 3, 4, 5] }] };

  test.each([
    [
      [1, 2, 3, 4, 5],
      [-4, -2, 0, 2, 4],
    ],
    [
      [1, 2, 3, 4],
      [-4, -2, 0, 2],
    ],
  ])("has its zero at pixel floor(N/2): %j", (values, positions) => {
    const [series] = profileChart({ ...options, lines: [{ label: "a", values }] }).series;
    expect([...Array.from(series?.x ?? [])]).toEqual(positions);
  });

  test("shows the frequency above, falling where the readout is reversed", () => {
    const upper = (hzPerMm: number) =>
      texts(profileChart({ ...options, hzPerMm }))
        .filter((text) => ["1000", "\u22121000"].includes(text.text))
        .map((text) => [text.text, text.at[0]] as const)
        .sort((a, b) => a[1] - b[1])
        .map(([text]) => text);
    expect(upper(500)).toEqual(["\u22121000", "1000"]);
    expect(upper(-500)).toEqual(["1000", "\u22121000"]);
    expect(texts(profileChart(options)).some((text) => text.text.includes("Hz"))).toBe(false);
  });

  test("says how many lines are not shown, and gives the same bytes again", () => {
    expect(profileChart({ ...options, total: 4 }).note).toBe("1 of 4 lines shown.");
    expect(profileChart(options).note).toBeUndefined();
    const [one, two] = [profilePlot(options), profilePlot(options)];
    expect(one.svg).toBe(two.svg);
    expect(Buffer.from(one.pixels).equals(Buffer.from(two.pixels))).toBe(true);
  });
});
