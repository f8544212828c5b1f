import { describe, expect, test } from "vitest";
import { UsageError } from "../../src/errors.js";
import {
  acquiredLines,
  acquiredSamples,
  centerSample,
  imageReadouts,
  resolveAcquisition,
} from "../../src/simulate/acquisition.js";
import type { AcquisitionOptions } from "../../src/simulate/options.js";

test("slices are taken even ones first, or ascending", () => {
  const order = (sliceOrder?: "ascending") => resolveAcquisition({ slices: 5, sliceOrder }).sliceOrder;
  expect(order()).toEqual([0, 2, 4, 1, 3]);
  expect(order("ascending")).toEqual([0, 1, 2, 3, 4]);
});

describe("partial acquisition", () => {
  test("of the standard's worked example: 84 of 140 lines put line 0 at 56 and k = 0 at line 14", () => {
    const a = resolveAcquisition({ matrix: { x: 8, y: 140 }, partialFourier: 0.6 });
    expect([acquiredLines(a), a.firstLine]).toEqual([84, 56]);
  });

  test.each([
    [10, 0.5],
    [11, 0.5],
    [11, 0.72],
    [12, 0.9],
  ])("of %s samples by %s keeps k = 0", (x, partialEcho) => {
    const a = resolveAcquisition({ matrix: { x, y: 4 }, readoutOversampling: 1, partialEcho });
    const last = acquiredSamples(a) - 1 - centerSample(a, 0);
    expect(centerSample(a, 0)).toBe(Math.floor(x / 2) - a.firstSample);
    expect(centerSample(a, 0)).toBeGreaterThanOrEqual(0);
    expect(last).toBe(x - 1 - Math.floor(x / 2)); // nothing is cut after the echo
  });

  test("of a reversed echo keeps the same k, so the echo comes late", () => {
    const options = { matrix: { x: 10, y: 4 }, partialEcho: 0.7, reversedEchoes: "all" } as const;
    const a = resolveAcquisition({ ...options, readoutOversampling: 1 });
    expect([acquiredSamples(a), centerSample(a, 0)]).toEqual([7, 4]); // k = 4, 3, 2, 1, 0, -1, -2
  });
});

test("image readouts are counted over all loops", () => {
  const a = resolveAcquisition({
    matrix: { x: 8, y: 10 },
    partialFourier: 0.6,
    slices: 3,
    echoTimesSeconds: [5e-3, 6e-3],
    repetitions: 4,
    averages: 5,
  });
  expect(imageReadouts(a)).toBe(6 * 3 * 2 * 4 * 5);
});

test("the resonance is whole Hz, as the header can state it", () => {
  expect(resolveAcquisition({ fieldT: 2.89 }).resonanceHz).toBe(123048913); // computed with NumPy: 42.577478461e6 * 2.89 = 123048912.75
});

describe("a wrong option", () => {
  const wrong: readonly (readonly [string, AcquisitionOptions])[] = [
    ["matrix.x", { matrix: { x: 0, y: 8 } }],
    ["matrix.y", { matrix: { x: 8, y: 7.5 } }],
    ["matrix.x times readoutOversampling", { matrix: { x: 40000, y: 8 } }],
    ["matrix.x times readoutOversampling", { matrix: { x: 9, y: 8 }, readoutOversampling: 1.5 }],
    ["readoutOversampling", { matrix: { x: 8, y: 8 }, readoutOversampling: 0.5 }],
    ["fovMm.y", { fovMm: { x: 1, y: -1 } }],
    ["coils", { coils: 1025 }],
    ["slices", { slices: 0 }],
    ["dwellSeconds", { dwellSeconds: Number.NaN }],
    ["fieldT", { fieldT: Number.POSITIVE_INFINITY }],
    ["partialEcho", { partialEcho: 0.4 }],
    ["partialFourier", { partialFourier: 1.1 }],
    ["echoTimesSeconds[1]", { echoTimesSeconds: [5e-3, 1e-3] }],
    ["number of echoTimesSeconds", { echoTimesSeconds: [] }],
    ["seed", { seed: -1 }],
    ["seed", { seed: 2 ** 32 }],
    ["positionMm", { positionMm: [0, Number.NaN, 0] }],
    ["noise.sigma", { noise: { sigma: -1 } }],
    ["noise.readouts", { noise: { sigma: 0, readouts: 2 } }],
    ["noise.relativeReceiverNoiseBandwidth", { noise: { relativeReceiverNoiseBandwidth: 0 } }],
    // a caller without types
    ["phantom", { phantom: "gong" as "disc" }],
  ];
  test.each(wrong)("%s is named", (field, options) => {
    expect(() => resolveAcquisition(options)).toThrow(UsageError);
    expect(() => resolveAcquisition(options)).toThrow(field);
  });
});
