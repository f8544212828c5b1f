import { describe, expect, it } from "vitest";
import {
  continuousWindow,
  edgeResponse,
  pointSpread,
  sampledWindow,
  type WindowFigures,
  windowFigures,
} from "../../src/kernels/point-spread.js";
import { parseWindow, windowGrid, windowValues } from "../../src/kernels/window.js";

/**
 * Computed with NumPy/SciPy from the formulas (4096 midpoints, Brent's root finder), tolerance 2e-4 and 0.02 dB:
 * coherent gain, mean square, noise bandwidth, -3 dB, -6 dB, FWHM, highest side lobe, SNR gain of a flat region.
 */
const TABLE: readonly { text: string; row: readonly number[] }[] = [
  { text: "none", row: [1, 1, 1, 0.8845, 1.205, 1.2067, -13.26, 1] },
  { text: "hann", row: [0.5, 0.375, 1.5, 1.4382, 1.9968, 2, -31.47, 1.633] },
  { text: "hamming", row: [0.54, 0.3974, 1.3628, 1.3008, 1.8123, 1.8152, -42.68, 1.5863] },
  { text: "blackman", row: [0.42, 0.3046, 1.7268, 1.6409, 2.295, 2.2988, -58.11, 1.8119] },
  { text: "welch", row: [0.6667, 0.53333, 1.2, 1.1535, 1.588, 1.5904, -21.29, 1.3693] },
  { text: "lanczos", row: [0.5895, 0.45141, 1.299, 1.2494, 1.7278, 1.7305, -26.41, 1.4884] },
  { text: "tukey:0.25", row: [0.875, 0.84375, 1.102, 1.0058, 1.3713, 1.3733, -13.6, 1.0887] },
  { text: "tukey:0.5", row: [0.75, 0.6875, 1.2222, 1.1482, 1.5702, 1.5726, -15.12, 1.206] },
  { text: "gaussian:0.4", row: [0.4951, 0.35435, 1.4456, 1.3709, 1.9183, 1.9215, -43.25, 1.6799] },
  { text: `gaussian:${1 / 3}`, row: [0.4166, 0.2954, 1.7017, 1.6014, 2.2555, 2.2593, -56.07, 1.8399] },
  { text: `kaiser:${2 * Math.PI}`, row: [0.4892, 0.35809, 1.4963, 1.427, 1.9903, 1.9935, -45.85, 1.6711] },
  { text: `kaiser:${3 * Math.PI}`, row: [0.4025, 0.29091, 1.7952, 1.7025, 2.3853, 2.3892, -69.62, 1.8541] },
  { text: "kaiser:6", row: [0.5, 0.36674, 1.4668, 1.3999, 1.9513, 1.9544, -43.79, 1.6513] },
  { text: "fermi:1:0.078125", row: [0.9458, 0.90679, 1.0136, 0.9259, 1.2627, 1.2645, -13.86, 1.0501] },
  { text: "fermi:0.9:0.05", row: [0.8937, 0.84961, 1.0639, 0.9799, 1.3367, 1.3387, -13.92, 1.0849] },
];

function expectRow(figures: WindowFigures, row: readonly number[]): void {
  const tolerance = 2e-4;
  const [cg, square, enbw, width3, width6, fwhm, lobe, gain] = row;
  expect(Math.abs(figures.coherentGain - cg!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.noiseFactor ** 2 - square!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.equivalentNoiseBandwidthBins - enbw!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.width3DbPixels - width3!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.width6DbPixels - width6!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.pointFwhmPixels - fwhm!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.lineFwhmPixels - fwhm!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.highestSideLobeDb - lobe!)).toBeLessThan(0.02);
  expect(Math.abs(figures.flatSnrGain - gain!)).toBeLessThan(tolerance);
  expect(Math.abs(figures.pointSnrGain - 1 / Math.sqrt(enbw!))).toBeLessThan(tolerance);
}

const theory = (text: string) => windowFigures(continuousWindow(parseWindow(text)));

describe("windowFigures in the continuous limit", () => {
  it.each(TABLE)("$text has the computed figures", ({ text, row }) => {
    expectRow(theory(text), row);
  });

  it("squares gains and noise for two separable axes, and leaves widths alone", () => {
    const one = theory("hann");
    const two = windowFigures(continuousWindow(parseWindow("hann"), "separable", 2));
    expect(two.coherentGain).toBeCloseTo(one.coherentGain ** 2, 14);
    expect(two.noiseFactor).toBeCloseTo(one.noiseFactor ** 2, 14);
    expect(two.pointFwhmPixels).toBe(one.pointFwhmPixels);
    expect(two.edgeOvershoot).toBe(one.edgeOvershoot);
  });

  /** Harris 1978, Table 1, from memory: noise bandwidth, -3 dB, -6 dB, highest side lobe, fall-off in dB/octave. */
  it.each([
    ["none", 1.0, 0.89, 1.21, -13, 6],
    ["hann", 1.5, 1.44, 2.0, -32, 18],
    ["hamming", 1.36, 1.3, 1.81, -43, 6],
    ["blackman", 1.73, 1.68, 2.35, -58, 18],
    ["welch", 1.2, 1.16, 1.59, -21, 12],
    ["lanczos", 1.3, 1.26, 1.74, -26, 12],
    ["tukey:0.25", 1.1, 1.01, 1.38, -14, 18],
    ["tukey:0.5", 1.22, 1.15, 1.57, -15, 18],
    ["gaussian:0.4", 1.39, 1.33, 1.86, -42, 6],
    [`gaussian:${1 / 3}`, 1.64, 1.55, 2.18, -55, 6],
    [`kaiser:${2 * Math.PI}`, 1.5, 1.43, 1.99, -46, 6],
    [`kaiser:${3 * Math.PI}`, 1.8, 1.71, 2.39, -69, 6],
  ])("%s is within 4 %% of the table of Harris 1978", (text, enbw, width3, width6, lobe, fall) => {
    // 4 %: that table's Blackman and Gaussian widths are 2 to 4 % away from the formulas printed beside them.
    const figures = theory(text);
    expect(Math.abs(figures.equivalentNoiseBandwidthBins / enbw - 1)).toBeLessThan(0.04);
    expect(Math.abs(figures.width3DbPixels / width3 - 1)).toBeLessThan(0.04);
    expect(Math.abs(figures.width6DbPixels / width6 - 1)).toBeLessThan(0.04);
    expect(Math.abs(figures.highestSideLobeDb / lobe - 1)).toBeLessThan(0.04);
    // 6 dB for each derivative up to the first that jumps; between 32 and 128 pixels Tukey 0.25 is 0.3 dB away.
    expect(Math.abs((figures.sideLobeFallOffDbPerOctave ?? 0) - fall)).toBeLessThan(0.3);
  });
});

describe("radial windows in two and three dimensions", () => {
  const radial = (text: string, dimensions: number) =>
    windowFigures(continuousWindow(parseWindow(text), "radial", dimensions));

  /** FWHM computed with SciPy: half maximum of 2 J1(x)/x, and of the Hankel transform by J0, 20000 radii. */
  it.each([
    ["none", 1.41017],
    ["hann", 2.1256],
    ["hamming", 1.9015],
    ["fermi:1:0.078125", 1.4692],
  ])("%s has its two-dimensional FWHM, and the one-dimensional one across an edge", (text, fwhm) => {
    const figures = radial(text, 2);
    expect(Math.abs(figures.pointFwhmPixels - fwhm)).toBeLessThan(1e-4);
    expect(figures.lineFwhmPixels).toBe(theory(text).lineFwhmPixels);
    expect(figures.edgeOvershoot).toBe(theory(text).edgeOvershoot);
  });

  it("is a jinc without a window: -17.57 dB, area pi/4", () => {
    const figures = radial("none", 2);
    expect(Math.abs(figures.highestSideLobeDb + 17.57)).toBeLessThan(0.005); // computed with SciPy
    // 8192 midpoints of a chord with a square root at its end: error below 8192^-1.5 = 1.3e-6.
    expect(Math.abs(figures.coherentGain - Math.PI / 4)).toBeLessThan(1.3e-6);
    expect(Math.abs(figures.noiseFactor ** 2 - Math.PI / 4)).toBeLessThan(1.3e-6);
  });

  it("is, for Hann in 2-D, the closed form of its means", () => {
    // Over the disc 2 int w r dr with w = (1 + cos pi r)/2 is 1/2 - 2/pi^2; w^2 gives 3/8 - 2/pi^2. Times pi/4 of the square.
    const figures = radial("hann", 2);
    expect(figures.coherentGain).toBeCloseTo((Math.PI / 4) * (0.5 - 2 / Math.PI ** 2), 5);
    expect(figures.noiseFactor ** 2).toBeCloseTo((Math.PI / 4) * (0.375 - 2 / Math.PI ** 2), 5);
  });

  it("is, for a ball, the window 1 - u^2 along any axis", () => {
    // Sections of a ball are discs of area pi (1 - u^2): Welch, but for the volume pi/6 of the cube.
    const ball = radial("none", 3);
    const welch = theory("welch");
    expect(ball.pointFwhmPixels).toBeCloseTo(welch.pointFwhmPixels, 6);
    expect(ball.highestSideLobeDb).toBeCloseTo(welch.highestSideLobeDb, 4);
    expect(ball.coherentGain).toBeCloseTo(Math.PI / 6, 6);
  });

  it("agrees with the gains that are applied to a grid", () => {
    const lengths = [96, 128];
    const axes = lengths.map((length) => ({ length }));
    for (const text of ["hann", "hamming"]) {
      const grid = windowGrid(parseWindow(text), "radial", axes);
      for (const axis of [0, 1]) {
        const figures = windowFigures(sampledWindow(grid, lengths, axis));
        // A disc's rim is a staircase one sample high: 1/96 of Hamming's 8 % edge, less for Hann's zero.
        expect(Math.abs(figures.pointFwhmPixels / radial(text, 2).pointFwhmPixels - 1)).toBeLessThan(1e-3);
        expect(Math.abs(figures.noiseFactor / radial(text, 2).noiseFactor - 1)).toBeLessThan(2e-3);
      }
    }
  });
});

describe("windowFigures of sampled gains", () => {
  it("take a user's own gains: triangle and Hamming by 25/46, at 4096 samples", () => {
    const N = 4096; // far enough in the limit for the table's 2e-4: errors are of order 1/N^2
    const triangle = Float64Array.from({ length: N }, (_, i) => 1 - Math.abs(i - N / 2) / (N / 2));
    // Computed with NumPy/SciPy, as the table above.
    expectRow(
      windowFigures(sampledWindow(triangle)),
      [0.5, 0.33333, 1.3333, 1.2736, 1.769, 1.7718, -26.52, 1.7321],
    );
    const exact = Float64Array.from(
      { length: N },
      (_, i) => (25 + 21 * Math.cos((2 * Math.PI * (i - N / 2)) / N)) / 46,
    );
    expectRow(
      windowFigures(sampledWindow(exact)),
      [0.5435, 0.39957, 1.3528, 1.2911, 1.7987, 1.8016, -41.69, 1.582],
    );
  });

  it.each([1, 2, 5, 8])("a flat window of %d samples has Dirichlet's kernel", (N) => {
    const flat = sampledWindow(windowValues(parseWindow("none"), N));
    const positions = Float64Array.from([0, 0.3, 0.5, 1.7, 3]);
    const spread = pointSpread(flat, positions);
    for (const [i, x] of positions.entries()) {
      const angle = (Math.PI * x) / N;
      const kernel = x === 0 ? 1 : Math.abs(Math.sin(Math.PI * x) / (N * Math.sin(angle)));
      // x = 3 of N = 1: every whole pixel is the point again, 0/0 above.
      if (N > 1) expect(Math.abs(spread[i]! - kernel)).toBeLessThan(1e-14);
      else expect(spread[i]).toBeCloseTo(1, 14);
    }
  });

  it("says Infinity where a single sample leaves no resolution", () => {
    const figures = windowFigures(sampledWindow(Float64Array.of(0, 1)));
    expect(figures.pointFwhmPixels).toBe(Number.POSITIVE_INFINITY);
    expect(figures.highestSideLobeDb).toBe(Number.NEGATIVE_INFINITY);
    expect(figures.equivalentNoiseBandwidthBins).toBeCloseTo(2, 14);
  });

  it.each([255, 256])("tend to the limit at %d samples", (N) => {
    for (const text of ["none", "hamming", "gaussian:fwhm=2", "tukey:0.5"]) {
      const sampled = windowFigures(sampledWindow(windowValues(parseWindow(text), N)));
      // h = (N-1)/2 rather than N/2 for odd N: widths change by 1/N = 0.4 % at most.
      expect(Math.abs(sampled.pointFwhmPixels / theory(text).pointFwhmPixels - 1)).toBeLessThan(0.0041);
      expect(Math.abs(sampled.noiseFactor / theory(text).noiseFactor - 1)).toBeLessThan(0.0041);
      expect(sampled.sideLobeFallOffDbPerOctave).toBeNull();
    }
  });

  it("widen the spread of an echo acquired on one side", () => {
    // Only k >= 0 of a flat window: the magnitude is that of half the samples, 1.2067 * 2 pixels wide.
    const half = Float64Array.from({ length: 256 }, (_, i) => (i >= 128 ? 1 : 0));
    const figures = windowFigures(sampledWindow(half));
    expect(Math.abs(figures.pointFwhmPixels - 2 * 1.20671)).toBeLessThan(1e-4);
    expect(figures.noiseFactor).toBeCloseTo(Math.SQRT1_2, 14);
  });
});

describe("edgeResponse", () => {
  const S = [0.93633, 1.01196, 0.99524]; // computed with SciPy: Si(m pi)/pi + 1/2 at m = 1/2, 3/2, 5/2

  it("is the sine integral without a window", () => {
    const positions = Float64Array.from([-0.5, 0, 0.5, 1, 1.5, 2, 2.5]);
    const response = edgeResponse(continuousWindow(parseWindow("none")), positions);
    const expected = [1 - S[0]!, 0.5, S[0]!, 1.08948987, S[1]!, 1 - 0.04858833, S[2]!];
    for (const [i, value] of expected.entries()) expect(Math.abs(response[i]! - value)).toBeLessThan(1e-5);
  });

  it("rings by the constants of Gibbs and Wilbraham", () => {
    const { edgeOvershoot, edgeUndershoot } = theory("none");
    // Published (OEIS A036792) and computed with SciPy; 8192 midpoints leave about 1e-8.
    expect(Math.abs(edgeOvershoot - 0.08948987)).toBeLessThan(1e-7);
    expect(Math.abs(edgeUndershoot - 0.04858833)).toBeLessThan(1e-7);
  });

  it.each(["none", "hann", "hamming", "tukey:0.5"])("is the running sum of the line spread: %s", (text) => {
    // From -1 to 4 pixels by midpoints of the spread, signed by doing it on the window's real cosine sum.
    const gains = windowValues(parseWindow(text), 65);
    const total = 4000;
    let sum = 0;
    for (let i = 0; i < total; i++) {
      const x = -1 + ((i + 0.5) * 5) / total;
      for (let k = -32; k <= 32; k++)
        sum += (gains[k + 32]! / 65) * Math.cos((2 * Math.PI * k * x) / 65) * (5 / total);
    }
    const [before, after] = edgeResponse(sampledWindow(gains), Float64Array.from([-1, 4]));
    // At x = -1 the response without a window is negative (-0.0895), so its magnitude is taken back.
    const sign = text === "none" || text === "tukey:0.5" ? -1 : 1;
    // Midpoints 1/800 pixel apart: (pi/800)^2/24 = 6e-7.
    expect(Math.abs(after! - sign * before! - sum)).toBeLessThan(2e-6);
  });

  it("hardly rings with a smooth window, and not at all where the response only climbs", () => {
    expect(theory("hann").edgeOvershoot).toBeLessThan(0.007);
    expect(theory("gaussian:0.1").edgeOvershoot).toBeLessThan(1e-9);
  });
});
