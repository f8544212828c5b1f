import { describe, expect, test } from "vitest";
import {
  noiseCovarianceFactor,
  rssMean,
  rssNoiseMean,
  rssRootMeanSquare,
  rssStandardDeviation,
} from "../../src/physics/noise-statistics.js";

/** Tables below are rounded to 5 decimals: half a unit of the last digit, and a little for binary fractions. */
const FIVE_DECIMALS = 5.1e-6;
const near = (value: number, expected: number) =>
  expect(Math.abs(value - expected)).toBeLessThan(FIVE_DECIMALS);

describe("noise alone", () => {
  // computed with SciPy (gammaln): channels, mean, standard deviation, root mean square, in units of sigma
  test.each([
    [1, 1.25331, 0.65514, Math.SQRT2],
    [2, 1.87997, 0.68243, 2],
    [4, 2.74162, 0.69534, 2.82843],
    [8, 3.93803, 0.70139, 4],
    [12, 4.84823, 0.70334, 4.89898],
    [16, 5.61284, 0.7043, 5.65685],
    [32, 7.96881, 0.70571, 8],
  ])("of %s channels", (channels, mean, deviation, rms) => {
    near(rssNoiseMean(channels), mean);
    near(rssMean(channels), mean);
    near(rssStandardDeviation(channels), deviation);
    near(rssRootMeanSquare(channels), rms);
  });

  test("of one channel deviates by sqrt(2 - pi/2)", () => {
    expect(rssStandardDeviation(1)).toBeCloseTo(Math.sqrt(2 - Math.PI / 2), 12); // closed form (Rayleigh)
  });
});

describe("with signal", () => {
  // computed with SciPy (hyp1f1): mean and standard deviation for A / sigma = 1, 2, 3, 5, 10, 20
  const signals = [1, 2, 3, 5, 10, 20];
  test.each([
    [
      1,
      [1.54857, 2.27238, 3.17258, 5.10107, 10.05013, 20.02502],
      [0.77584, 0.91448, 0.96683, 0.98949, 0.99747, 0.99937],
    ],
    [
      4,
      [2.90886, 3.36818, 4.02955, 5.66705, 10.34569, 20.17446],
      [0.73384, 0.80955, 0.87335, 0.94053, 0.98321, 0.99567],
    ],
    [
      8,
      [4.05942, 4.40539, 4.93199, 6.33988, 10.72689, 20.37199],
      [0.72187, 0.76978, 0.82186, 0.89772, 0.96631, 0.99088],
    ],
  ])("in %s channels", (channels, means, deviations) => {
    for (const [i, signal] of signals.entries()) {
      near(rssMean(channels, 1, signal), means[i] ?? Number.NaN);
      near(rssStandardDeviation(channels, 1, signal), deviations[i] ?? Number.NaN);
    }
  });

  test("scales with sigma", () => {
    expect(rssMean(4, 2.5, 5)).toBeCloseTo(2.5 * rssMean(4, 1, 2), 12);
    expect(rssStandardDeviation(4, 2.5, 5)).toBeCloseTo(2.5 * rssStandardDeviation(4, 1, 2), 12);
  });

  test("the two series meet at A^2 / 2 sigma^2 = 500", () => {
    // The mean grows by less than dA across the step, so 1e-9 here is all that may be due to the change of series.
    const below = Math.sqrt(1000) * (1 - 1e-13);
    const above = Math.sqrt(1000) * (1 + 1e-13);
    for (const channels of [1, 8, 32, 128])
      expect(Math.abs(rssMean(channels, 1, above) - rssMean(channels, 1, below))).toBeLessThan(1e-9);
  });

  test("tends to the signal where it is strong", () => {
    const signal = 1e4; // mean = A + (n - 1/2) sigma^2 / A to second order
    expect(rssMean(8, 1, signal)).toBeCloseTo(signal + 7.5 / signal, 8);
    expect(rssStandardDeviation(8, 1, signal)).toBeCloseTo(1, 5); // closed form 1; cancellation leaves ~1e-8 of A^2
  });
});

describe("noise readouts and image readouts", () => {
  test("amplitudes scale by the published factors", () => {
    // computed with NumPy, 6 decimals; 0.79 is the relative noise bandwidth of the standard's example header
    expect(1 / Math.sqrt(noiseCovarianceFactor(5e-6, 10e-6, 0.79))).toBeCloseTo(1.256981, 6);
    expect(1 / Math.sqrt(noiseCovarianceFactor(5e-6, 5e-6, 0.79))).toBeCloseTo(0.888819, 6);
    expect(noiseCovarianceFactor(5e-6, 5e-6)).toBe(1);
  });
});
