import { describe, expect, it } from "vitest";
import {
  backgroundDeviationFactor,
  chainNoiseFactor,
  differenceSnr,
  meanSquareError,
  normalizedRmsError,
  peakSnrDb,
  ReplicaStatistics,
  ssimTaps,
  structuralSimilarity,
  structuralSimilarityMap,
} from "../../src/kernels/image-quality.js";
import { parseWindow, WINDOWS, windowValues } from "../../src/kernels/window.js";
import { seededNormal } from "./seeded-normal.js";

const SIZE = 64;
const SHAPE = [SIZE, SIZE] as const;
const image = (value: (x: number, y: number) => number) =>
  Float64Array.from({ length: SIZE * SIZE }, (_, i) => value(i % SIZE, Math.floor(i / SIZE)));

const ramp = image((x) => x / 63);
const flatterRamp = image((x) => (0.9 * x) / 63 + 0.05);
const checkerboard = image((x, y) => (x + y) % 2);
const constant = (level: number) => image(() => level);

describe("errors against a reference", () => {
  it("are those computed with NumPy for a ramp and 0.9 ramp + 0.05", () => {
    // Seven digits were printed.
    expect(Math.abs(meanSquareError(flatterRamp, ramp) - 8.597884e-4)).toBeLessThan(1e-9);
    expect(Math.abs(normalizedRmsError(flatterRamp, ramp, "norm") - 0.0505871)).toBeLessThan(1e-7);
    expect(Math.abs(normalizedRmsError(flatterRamp, ramp, "range") - 0.02932215)).toBeLessThan(1e-7);
    expect(Math.abs(normalizedRmsError(flatterRamp, ramp, "mean") - 0.0586443)).toBeLessThan(1e-7);
    expect(Math.abs(peakSnrDb(flatterRamp, ramp, 1) - 30.656084)).toBeLessThan(1e-5);
  });

  it("follow the formula of the peak signal-to-noise ratio", () => {
    expect(Math.abs(peakSnrDb(constant(11), constant(10), 255) - 48.130804)).toBeLessThan(1e-6);
    expect(Math.abs(peakSnrDb(constant(0.51), constant(0.5), 1) - 40)).toBeLessThan(1e-9);
    expect(peakSnrDb(ramp, ramp, 1)).toBe(Number.POSITIVE_INFINITY);
    expect(normalizedRmsError(ramp, ramp, "norm")).toBe(0);
  });

  it.each([
    [8, 58.923],
    [16, 107.121],
  ])("see the ceiling of a %d-bit picture", (bits, ceilingDb) => {
    // Closed form: rounding errors of a uniform signal have variance 1/12 of a level. The values
    // are multiples of the golden ratio modulo 1, which fill 0 .. 1 evenly.
    const levels = 2 ** bits - 1;
    const values = Float64Array.from({ length: 200000 }, (_, i) => (i * 0.6180339887498949) % 1);
    const rounded = values.map((value) => Math.round(value * levels) / levels);
    expect(Math.abs(peakSnrDb(rounded, values, 1) - ceilingDb)).toBeLessThan(0.05);
  });

  it("count only the mask's pixels", () => {
    const mask = Uint8Array.from({ length: SIZE * SIZE }, (_, i) => (i % SIZE === 63 ? 1 : 0));
    // The last column alone: reference 1, image 0.95.
    expect(normalizedRmsError(flatterRamp, ramp, "norm", mask)).toBeCloseTo(0.05, 14);
    expect(normalizedRmsError(flatterRamp, ramp, "mean", mask)).toBeCloseTo(0.05, 14);
    expect(peakSnrDb(flatterRamp, ramp, 1, mask)).toBeCloseTo(-20 * Math.log10(0.05), 10);
  });

  it("read views that do not start at byte 0", () => {
    const store = new Float32Array(7);
    store.set([9, 9, 1, 2, 3, 4, 9]);
    expect(meanSquareError(store.subarray(2, 6), Float32Array.of(1, 2, 3, 6))).toBe(1);
  });
});

describe("structural similarity", () => {
  it("weighs by the Gaussian of 11 taps", () => {
    const taps = ssimTaps();
    // computed with NumPy, eight digits printed
    expect(Math.abs(taps[5]! - 0.26601172)).toBeLessThan(1e-8);
    expect(Math.abs(taps[0]! - 0.00102838)).toBeLessThan(1e-8);
    expect(taps[10]).toBe(taps[0]);
  });

  it.each([
    ["a ramp and 0.9 ramp + 0.05", ramp, flatterRamp, 0.990798],
    ["constants 0.5 and 0.6", constant(0.5), constant(0.6), 0.983609],
    ["constants 0.2 and 0.4", constant(0.2), constant(0.4), 0.8001],
    ["a checkerboard and its mean", checkerboard, constant(0.5), 0.003587],
    ["a checkerboard and its inverse", checkerboard, checkerboard.map((v) => 1 - v), -0.996406],
  ])("of %s is that computed with SciPy", (_, a, b, value) => {
    // Computed with scipy.signal.convolve2d, valid region; six digits printed.
    expect(Math.abs(structuralSimilarity(a, b, SHAPE, 1) - value)).toBeLessThan(2e-6);
    expect(structuralSimilarity(b, a, SHAPE, 1)).toBeCloseTo(structuralSimilarity(a, b, SHAPE, 1), 12);
  });

  it("is 1 for equal images and keeps axes apart: 12 x 13 against a convolution written out", () => {
    const [height, width] = [12, 13];
    const a = Float32Array.from({ length: height * width }, (_, i) => (i * 37) % 101);
    const b = a.map((value, i) => value + ((i * 53) % 17));
    expect(structuralSimilarity(a, a, [height, width], 100)).toBeCloseTo(1, 12);
    const map = structuralSimilarityMap(a, b, [height, width], 100);
    expect(map.length).toBe(2 * 3);
    const taps = ssimTaps();
    for (const [row, column] of [
      [0, 0],
      [1, 2],
      [0, 1],
    ] as const) {
      const local = (f: (i: number) => number) => {
        let sum = 0;
        for (let j = 0; j < 121; j++) {
          const [dy, dx] = [Math.floor(j / 11), j % 11];
          sum += taps[dy]! * taps[dx]! * f((row + dy) * width + column + dx);
        }
        return sum;
      };
      const [ma, mb] = [local((i) => a[i]!), local((i) => b[i]!)];
      const va = local((i) => (a[i]! - ma) ** 2);
      const vb = local((i) => (b[i]! - mb) ** 2);
      const cov = local((i) => (a[i]! - ma) * (b[i]! - mb));
      const expected = ((2 * ma * mb + 1) * (2 * cov + 9)) / ((ma * ma + mb * mb + 1) * (va + vb + 9));
      expect(map[row * 3 + column]).toBeCloseTo(expected, 11);
    }
  });

  it("averages the windows about a mask's pixels", () => {
    const mask = new Uint8Array(SIZE * SIZE);
    mask[20 * SIZE + 30] = 1;
    mask[2 * SIZE + 30] = 1; // no window fits here
    const map = structuralSimilarityMap(flatterRamp, ramp, SHAPE, 1);
    expect(structuralSimilarity(flatterRamp, ramp, SHAPE, 1, mask)).toBe(map[15 * 54 + 25]);
  });

  it("refuses an image smaller than its window", () => {
    const small = new Float64Array(110);
    expect(() => structuralSimilarity(small, small, [10, 11], 1)).toThrow(RangeError);
  });
});

describe("SNR", () => {
  it("is 50 by the difference of two images of signal 100 and noise 2", () => {
    const pixels = 400 * 400;
    const normal = seededNormal(4);
    const noisy = () =>
      Float64Array.from({ length: pixels }, () => Math.hypot(100 + 2 * normal(), 2 * normal()));
    const [first, second] = [noisy(), noisy()];
    // Four standard errors: 50/sqrt(2 * 160000) each; Rice's bias at SNR 50 is 0.01.
    expect(Math.abs(differenceSnr(first, second) - 50)).toBeLessThan(0.35 + 0.01);
  });

  it("is sqrt(2) mean over the sample deviation", () => {
    // Differences 1, -1, 1, -1: SD sqrt(4/3); mean of both 10; the masked pixel would spoil both.
    const first = Float32Array.of(10.5, 9.5, 10.5, 9.5, 1000);
    const second = Float32Array.of(9.5, 10.5, 9.5, 10.5, 0);
    const mask = Uint8Array.of(1, 1, 1, 1, 0);
    expect(differenceSnr(first, second, mask)).toBeCloseTo((Math.SQRT2 * 10) / Math.sqrt(4 / 3), 12);
  });

  it.each([
    [1, 0.65514],
    [2, 0.68243],
    [4, 0.69534],
    [8, 0.70139],
    [12, 0.70334],
    [16, 0.7043],
    [32, 0.70571],
  ])("from the background of %d channels uses the deviation computed with SciPy", (channels, factor) => {
    expect(Math.abs(backgroundDeviationFactor(channels) - factor)).toBeLessThan(6e-6); // five digits printed
  });
});

describe("noise through a chain", () => {
  it("is that of the product of its windows", () => {
    const hann = windowValues(parseWindow("hann"), 64);
    const half = Float64Array.from({ length: 64 }, (_, i) => (i < 32 ? 1 : 0));
    // <cos^8> over a period is 35/128: Hann squared is cos^4(pi u/2).
    expect(chainNoiseFactor([hann, hann])).toBeCloseTo(Math.sqrt(35 / 128), 14);
    expect(chainNoiseFactor([half, half])).toBeCloseTo(Math.SQRT1_2, 14);
    expect(chainNoiseFactor([])).toBe(1);
  });

  it.each(WINDOWS.map(({ name }) => name))("is what pseudo-replicas measure, within 99 %%: %s", (name) => {
    const N = 32;
    const gains = windowValues(parseWindow(name), N);
    const normal = seededNormal(7);
    const statistics = new ReplicaStatistics(2 * N);
    const replicas = 400;
    for (let r = 0; r < replicas; r++) statistics.add(windowedNoiseImage(gains, normal));
    const variances = statistics.standardDeviation().map((sd) => sd * sd);
    const measured = Math.sqrt(variances.reduce((sum, v) => sum + v) / (2 * N));
    // All 2N parts pooled. A window correlates neighbours, so that they count as (sum w^2)^2 / (N sum w^4) of their number;
    // a deviation from n free values has the relative standard error 1/sqrt(2n), and 99 % is 2.576 of these.
    const squares = gains.reduce((sum, w) => sum + w ** 2, 0);
    const free = ((replicas - 1) * 2 * squares ** 2) / gains.reduce((sum, w) => sum + w ** 4, 0);
    expect(Math.abs(measured / chainNoiseFactor([gains]) - 1)).toBeLessThan(2.576 / Math.sqrt(2 * free));
    for (const mean of statistics.mean())
      expect(Math.abs(mean)).toBeLessThan((5 * measured) / Math.sqrt(replicas));
  });
});

describe("ReplicaStatistics", () => {
  it("has mean and deviation with divisor R - 1, without losing digits on a large level", () => {
    const statistics = new ReplicaStatistics(2);
    for (const value of [4, 7, 13, 16]) statistics.add(Float64Array.of(value, 1e9 + value));
    // The textbook example of cancellation: mean 10, variance 30.
    expect([...statistics.mean()]).toEqual([10, 1e9 + 10]);
    expect([...statistics.standardDeviation()]).toEqual([Math.sqrt(30), Math.sqrt(30)]);
    expect(statistics.count).toBe(4);
  });

  it("has no deviation from one replica, and refuses another length", () => {
    const statistics = new ReplicaStatistics(1);
    statistics.add(Float32Array.of(3));
    expect(statistics.standardDeviation()[0]).toBeNaN();
    expect(() => statistics.add(Float32Array.of(1, 2))).toThrow(
      "a replica has 2 values; the ones before had 1",
    );
  });
});

/** Unit noise per part in k-space, times the gains, by a unitary inverse transform written out; interleaved. */
function windowedNoiseImage(gains: Float64Array, normal: () => number): Float64Array {
  const N = gains.length;
  const out = new Float64Array(2 * N);
  for (let k = 0; k < N; k++) {
    const [re, im] = [gains[k]! * normal(), gains[k]! * normal()];
    for (let x = 0; x < N; x++) {
      const angle = (2 * Math.PI * (k - N / 2) * (x - N / 2)) / N;
      out[2 * x]! += (re * Math.cos(angle) - im * Math.sin(angle)) / Math.sqrt(N);
      out[2 * x + 1]! += (re * Math.sin(angle) + im * Math.cos(angle)) / Math.sqrt(N);
    }
  }
  return out;
}
