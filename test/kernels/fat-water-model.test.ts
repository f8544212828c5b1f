import { describe, expect, it } from "vitest";
import { fatSignal, fatWaterModel } from "../../src/kernels/fat-water-model.js";

/** Hamilton et al. 2011, NMR Biomed 24:784: grouped spectrum of human liver [from memory]. */
const HAMILTON = [
  [0.6, 0.047],
  [-0.5, 0.039],
  [-1.95, 0.006],
  [-2.6, 0.12],
  [-3.4, 0.7],
  [-3.8, 0.088],
] as const;
const at3T = HAMILTON.map(([ppm, share]) => ({ offsetHz: ppm * 42.577478461 * 3, share }));
const still = (count: number) => new Array<number>(count).fill(Number.POSITIVE_INFINITY);

describe("fatSignal", () => {
  // computed with NumPy: S2
  it.each([
    [1.15e-3, 0.79871],
    [2.3e-3, 0.81892],
    [4.6e-3, 0.55947],
    [0, 1],
  ])("at %f s has the size %f", (seconds, size) => {
    expect(Math.hypot(...fatSignal(at3T, seconds))).toBeCloseTo(size, 5);
  });

  it("turns the way of a spin below water: -2 pi df t", () => {
    const [re, im] = fatSignal([{ offsetHz: -100, share: 1 }], 0.0025);
    expect(re).toBeCloseTo(0, 12);
    expect(im).toBeCloseTo(1, 12);
  });
});

describe("fatWaterModel", () => {
  // NSA with a known field = 1 / variance; computed with NumPy: S8 (Reeder et al. 2004)
  it.each([
    [[0, Math.PI], 2],
    [[0, Math.PI, 2 * Math.PI], 8 / 3],
    [[0, (2 * Math.PI) / 3, (4 * Math.PI) / 3], 3],
    [[0, Math.PI / 2, Math.PI], 8 / 3],
    [[0, Math.PI / 2], 1],
  ])("has the noise of the echo phases %j: NSA %f", (phases, nsa) => {
    const offsetHz = 434.29;
    const echoSeconds = phases.map((angle) => angle / (2 * Math.PI * offsetHz));
    const model = fatWaterModel(
      { echoSeconds, pixelBandwidthHz: still(phases.length) },
      [{ offsetHz, share: 1 }],
      5,
      0,
    );
    expect(model.noiseGain.water ** -2).toBeCloseTo(nsa, 6);
    expect(model.noiseGain.fat ** -2).toBeCloseTo(nsa, 6);
  });

  it("solves each sample at its own time exactly, both directions of reading, and cancels both species", () => {
    const timing = {
      echoSeconds: [0.0026, 0.00338, 0.00416, 0.005],
      pixelBandwidthHz: [250, -250, 250, -250],
    };
    for (const length of [9, 16]) {
      const model = fatWaterModel(timing, at3T, length, 0);
      for (let k = 0; k < length; k++) {
        const [w, f] = [
          [1.2, -0.4],
          [0.3, 0.8],
        ] as const;
        const echo = timing.echoSeconds.map((seconds, e) => {
          const tau = seconds + (k - Math.floor(length / 2)) / (length * timing.pixelBandwidthHz[e]!);
          expect(model.times[e * length + k]).toBeCloseTo(tau, 15);
          const [c, s] = fatSignal(at3T, tau);
          return [w[0] + f[0] * c - f[1] * s, w[1] + f[0] * s + f[1] * c] as const;
        });
        for (const [species, truth] of [w, f].entries()) {
          const sum = combination(echo, model.inverse, 2 * (2 * k + species) * 4);
          expect(Math.hypot(sum[0] - truth[0], sum[1] - truth[1])).toBeLessThan(1e-12);
        }
        for (const triple of [0, 1]) {
          const left = combination(echo.slice(triple, triple + 3), model.residual, 6 * (triple * length + k));
          expect(Math.hypot(...left)).toBeLessThan(1e-12);
        }
      }
    }
  });

  it("refuses a single echo and unequal numbers", () => {
    expect(() => fatWaterModel({ echoSeconds: [0.001], pixelBandwidthHz: [100] }, at3T, 8)).toThrow(
      RangeError,
    );
    expect(() => fatWaterModel({ echoSeconds: [0.001, 0.002], pixelBandwidthHz: [100] }, at3T, 8)).toThrow(
      RangeError,
    );
  });
});

/** `sum_e factor_e echo_e`, the factors from float `at` on. */
function combination(
  echo: readonly (readonly [number, number])[],
  factors: Float64Array,
  at: number,
): [number, number] {
  let [re, im] = [0, 0];
  for (const [e, [a, b]] of echo.entries()) {
    re += factors[at + 2 * e]! * a - factors[at + 2 * e + 1]! * b;
    im += factors[at + 2 * e]! * b + factors[at + 2 * e + 1]! * a;
  }
  return [re, im];
}
