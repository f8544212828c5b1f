import { describe, expect, it } from "vitest";
import {
  formatWindow,
  noiseFactor,
  parseWindow,
  WINDOWS,
  WindowError,
  windowGain,
  windowGrid,
  windowValues,
} from "../../src/kernels/window.js";

/** Computed with SciPy 1.17 (scipy.signal.windows): sym=False for length 8, sym=True for length 7. */
const SCIPY: readonly (readonly [string, readonly number[]])[] = [
  ["hann", [0, 0.146446609407, 0.5, 0.853553390593, 1, 0.853553390593, 0.5, 0.146446609407]],
  ["hann", [0, 0.25, 0.75, 1, 0.75, 0.25, 0]],
  ["hamming", [0.08, 0.214730880654, 0.54, 0.865269119346, 1, 0.865269119346, 0.54, 0.214730880654]],
  ["hamming", [0.08, 0.31, 0.77, 1, 0.77, 0.31, 0.08]],
  ["blackman", [0, 0.0664466094067, 0.34, 0.773553390593, 1, 0.773553390593, 0.34, 0.0664466094067]],
  ["blackman", [0, 0.13, 0.63, 1, 0.63, 0.13, 0]],
  [
    "lanczos",
    [0, 0.300105438719, 0.636619772368, 0.900316316157, 1, 0.900316316157, 0.636619772368, 0.300105438719],
  ],
  ["lanczos", [0, 0.413496671566, 0.826993343133, 1, 0.826993343133, 0.413496671566, 0]],
  ["tukey:0.5", [0, 0.5, 1, 1, 1, 1, 1, 0.5]],
  ["tukey:0.5", [0, 0.75, 1, 1, 1, 0.75, 0]],
  ["tukey:0.3", [0, 0.933012701892, 1, 1, 1, 1, 1, 0.933012701892]],
  [
    "gaussian:0.4",
    [
      0.0439369336234, 0.172421623894, 0.457833361772, 0.822577562399, 1, 0.822577562399, 0.457833361772,
      0.172421623894,
    ],
  ],
  [
    "gaussian:0.4",
    [0.0439369336234, 0.249352208777, 0.706648277858, 1, 0.706648277858, 0.249352208777, 0.0439369336234],
  ],
  [
    "kaiser:6",
    [
      0.0148733371048, 0.163607564598, 0.482955606411, 0.840684747096, 1, 0.840684747096, 0.482955606411,
      0.163607564598,
    ],
  ],
  [
    "kaiser:6",
    [0.0148733371048, 0.253706080271, 0.731895415398, 1, 0.731895415398, 0.253706080271, 0.0148733371048],
  ],
];

function expectClose(actual: ArrayLike<number>, expected: readonly number[], tolerance: number): void {
  expect(actual.length).toBe(expected.length);
  for (const [i, value] of expected.entries()) {
    expect(Math.abs((actual[i] ?? Number.NaN) - value), `[${i}]`).toBeLessThan(tolerance);
  }
}

describe("windowValues", () => {
  it.each(SCIPY)("%s as SciPy computes it: %j", (text, expected) => {
    // The values were printed with 12 digits.
    expectClose(windowValues(parseWindow(text), expected.length), expected, 1e-12);
  });

  it.each(WINDOWS.map(({ name }) => name))("%s is exactly 1 at k = 0 and even in k", (name) => {
    for (const length of [1, 2, 7, 8, 255, 256]) {
      const gains = windowValues(parseWindow(name), length);
      const centre = Math.floor(length / 2);
      expect(gains[centre]).toBe(1);
      for (let k = 1; centre + k < length; k++) expect(gains[centre + k]).toBe(gains[centre - k]);
      for (const gain of gains) expect(gain).toBeGreaterThanOrEqual(0);
    }
  });

  it("has mean 0.5 for Hann, the periodic form", () => {
    // Computed with SciPy: the periodic form has mean 0.5, the symmetric one 0.49804688.
    const gains = windowValues(parseWindow("hann"), 256);
    expect(Math.abs(gains.reduce((sum, gain) => sum + gain) / 256 - 0.5)).toBeLessThan(1e-15);
  });

  it("measures u by the larger acquired side and stays centred at k = 0", () => {
    // 12 samples, centre 6, acquired 4 .. 11: sides 2 and 5, so h = 5 and Welch is 1 - (k/5)^2.
    const gains = windowValues(parseWindow("welch"), 12, { firstSample: 4, lastSample: 11 });
    expectClose(
      gains,
      [0, 0, 0.36, 0.64, 0.84, 0.96, 1, 0.96, 0.84, 0.64, 0.36, 0].map((v) => v),
      1e-15,
    );
    // The larger side below k = 0: 0 .. 8 of 12, h = 6.
    expect(windowValues(parseWindow("welch"), 12, { firstSample: 0, lastSample: 8 })[8]).toBeCloseTo(
      1 - 4 / 36,
      15,
    );
  });

  it("gives a Gaussian the image width that was asked for", () => {
    // exp(-4 ln2 (x/fwhm)^2) sampled at the pixels and transformed: its spectrum over its sum is the window. Aliasing of
    // a 4-pixel Gaussian beyond the band is exp(-(4 pi 0.5)^2/(4 ln 2)) = 6.5e-7 at the edge, far less inside.
    for (const length of [33, 64]) {
      const gains = windowValues(parseWindow("gaussian:fwhm=4"), length);
      const centre = Math.floor(length / 2);
      for (const k of [0, 3, 9]) {
        let sum = 0;
        let total = 0;
        for (let x = -centre; x < length - centre; x++) {
          const blur = Math.exp(-4 * Math.LN2 * (x / 4) ** 2);
          sum += blur * Math.cos((2 * Math.PI * k * x) / length);
          total += blur;
        }
        expect(Math.abs(gains[centre + k]! - sum / total)).toBeLessThan(1e-6);
      }
    }
  });

  it("gives Fermi one half at its radius and 10 to 90 % over 4.394 widths", () => {
    const fermi = parseWindow("fermi:0.8:0.05");
    // Scaling to 1 at u = 0 moves these by exp(-16) = 1.1e-7.
    expect(Math.abs(windowGain(fermi, 0.8) - 0.5)).toBeLessThan(2e-7);
    const halfRise = (4.394449154672439 / 2) * 0.05; // ln 81 widths, halved
    expect(Math.abs(windowGain(fermi, 0.8 - halfRise) - 0.9)).toBeLessThan(2e-7);
    expect(Math.abs(windowGain(fermi, 0.8 + halfRise) - 0.1)).toBeLessThan(2e-7);
  });

  it("has the limits that the formulas promise", () => {
    const hann = windowValues(parseWindow("hann"), 16);
    expectClose(windowValues(parseWindow("tukey:1"), 16), [...hann], 1e-15);
    expect([...windowValues(parseWindow("tukey:0"), 5)]).toEqual([1, 1, 1, 1, 1]);
    expect([...windowValues(parseWindow("kaiser:0"), 5)]).toEqual([1, 1, 1, 1, 1]);
  });
});

describe("windowGrid", () => {
  const axes = [{ length: 3 }, { length: 4 }, { length: 5 }];

  it("multiplies the axes' gains, last axis fastest", () => {
    const spec = parseWindow("hamming");
    const grid = windowGrid(spec, "separable", axes);
    const [z, y, x] = axes.map(({ length }) => windowValues(spec, length));
    expect(grid.length).toBe(60);
    for (let i = 0; i < 60; i++) {
      const product = z![Math.floor(i / 20)]! * y![Math.floor(i / 5) % 4]! * x![i % 5]!;
      expect(grid[i]).toBeCloseTo(product, 15);
    }
  });

  it("takes the distance from k = 0 when radial, and 0 beyond the edge", () => {
    const spec = parseWindow("welch");
    const grid = windowGrid(spec, "radial", axes);
    for (let i = 0; i < 60; i++) {
      const square =
        (Math.floor(i / 20) - 1) ** 2 + ((Math.floor(i / 5) % 4) / 2 - 1) ** 2 + (((i % 5) - 2) / 2) ** 2;
      expect(Math.abs(grid[i]! - Math.max(0, 1 - square))).toBeLessThan(1e-15);
    }
    // On an axis the radial window is the window itself; a corner is outside.
    const none = windowGrid(parseWindow("none"), "radial", [{ length: 7 }, { length: 6 }]);
    expect([...none.subarray(0, 6)]).toEqual([0, 0, 0, 1, 0, 0]);
    expect([...none.subarray(18, 24)]).toEqual([1, 1, 1, 1, 1, 1]);
  });

  it("fills a disc when radial and none", () => {
    // Computed with NumPy: the k in -128 .. 127 squared with kx^2 + ky^2 <= 128^2 (pi 128^2 is 51472).
    const none = windowGrid(parseWindow("none"), "radial", [{ length: 256 }, { length: 256 }]);
    expect(none.reduce((sum, gain) => sum + gain)).toBe(51431);
  });
});

describe("noiseFactor", () => {
  it("is sqrt(3/8) for Hann and 1 for none", () => {
    expect(noiseFactor(windowValues(parseWindow("hann"), 64))).toBeCloseTo(Math.sqrt(0.375), 14);
    expect(noiseFactor(windowValues(parseWindow("none"), 65))).toBe(1);
  });
});

describe("parseWindow", () => {
  it.each([
    ["hann", { name: "hann" }],
    ["tukey", { name: "tukey", alpha: 0.5 }],
    ["tukey:0.25", { name: "tukey", alpha: 0.25 }],
    ["fermi:0.9:0.05", { name: "fermi", radius: 0.9, width: 0.05 }],
    ["fermi:width=0.05", { name: "fermi", radius: 1, width: 0.05 }],
    ["gaussian", { name: "gaussian", sigma: 0.4 }],
    ["gaussian:fwhm=2", { name: "gaussian", fwhm: 2 }],
    [
      { name: "kaiser", beta: 9 },
      { name: "kaiser", beta: 9 },
    ],
  ])("reads %j", (raw, spec) => {
    expect(parseWindow(raw)).toEqual(spec);
    expect(parseWindow(parseWindow(raw))).toEqual(spec);
    expect(parseWindow(formatWindow(parseWindow(raw)))).toEqual(spec);
  });

  it.each([
    [3, "must be text or an object with a name"],
    ["han", '"han" is not a window'],
    ["toString", '"toString" is not a window'],
    ["hann:1", '"1" is one value too many'],
    ["tukey:0.5:0.5", '"0.5" is one value too many'],
    ["tukey:alpha=0.5:alpha=0.6", '"alpha=0.6" is one value too many'],
    ["tukey:", "alpha must be a number from 0 to 1"],
    ["tukey:half", "alpha must be a number from 0 to 1"],
    ["tukey:1.5", "alpha must be a number from 0 to 1"],
    ["tukey:beta=1", "beta is not a parameter of it"],
    [{ name: "tukey", alpha: "0.5" }, "alpha must be a number from 0 to 1"],
    [{ name: "gaussian", sigma: 0.4, fwhm: 2 }, "fwhm stands in place of sigma"],
  ])("refuses %j: %s", (raw, rule) => {
    expect(() => parseWindow(raw)).toThrow(WindowError);
    expect(() => parseWindow(raw)).toThrow(rule);
  });

  it("says what would have been right", () => {
    expect(() => parseWindow("tukey:2")).toThrow(
      'window "tukey:2": alpha must be a number from 0 to 1. tukey takes alpha (fraction of h, 0 to 1).',
    );
  });

  it.each(WINDOWS.flatMap(({ name, parameters }) => parameters.map((p) => ({ window: name, ...p }))))(
    "$window stays within 0 .. 1 over the range of $name",
    ({ window, name, minimum, maximum }) => {
      for (const value of [minimum, maximum]) {
        const gains = windowValues(parseWindow({ name: window, [name]: value }), 9);
        expect(gains[4]).toBe(1);
        for (const gain of gains) expect(gain >= 0 && gain <= 1).toBe(true);
      }
    },
  );
});
