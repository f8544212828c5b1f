import { describe, expect, test } from "vitest";
import { UsageError } from "../../src/errors.js";
import { acquire } from "../../src/simulate/acquire.js";
import { type Acquisition, resolveAcquisition } from "../../src/simulate/acquisition.js";
import { defaultCovariance, isHermitian } from "../../src/simulate/noise.js";

/** `(1/N) sum n n^H` of readouts, [coil, coil] interleaved, and N. */
function covarianceOf(
  readouts: readonly Float32Array[],
  coils: number,
): { covariance: Float64Array; count: number } {
  const covariance = new Float64Array(2 * coils * coils);
  let count = 0;
  for (const samples of readouts) {
    const length = samples.length / (2 * coils);
    count += length;
    for (let i = 0; i < coils; i++)
      for (let j = 0; j < coils; j++)
        for (let n = 0; n < length; n++) {
          const [a = 0, b = 0] = samples.subarray(2 * (i * length + n));
          const [c = 0, d = 0] = samples.subarray(2 * (j * length + n));
          covariance[2 * (i * coils + j)]! += a * c + b * d;
          covariance[2 * (i * coils + j) + 1]! += b * c - a * d;
        }
  }
  return { covariance: covariance.map((sum) => sum / count), count };
}

/** Every element within 4 standard errors: the error of element (i, j) is sqrt(C_ii C_jj / N) for complex Gaussian noise. */
function expectCovariance(found: Float64Array, truth: Float64Array, coils: number, count: number): void {
  const variance = (i: number) => truth[2 * (i * coils + i)] ?? Number.NaN;
  for (let i = 0; i < coils; i++)
    for (let j = 0; j < coils; j++) {
      const at = 2 * (i * coils + j);
      const error = Math.hypot(
        (found[at] ?? 0) - (truth[at] ?? 0),
        (found[at + 1] ?? 0) - (truth[at + 1] ?? 0),
      );
      expect(error).toBeLessThan(4 * Math.sqrt((variance(i) * variance(j)) / count));
    }
}

const small = { matrix: { x: 32, y: 32 }, slices: 1 } as const;
const samplesOf = (a: Acquisition) => [...acquire(a)].map((readout) => readout.samples);

describe("noise of an acquisition", () => {
  // From a textbook example of prewhitening, whose Cholesky factor was checked with NumPy
  const covariance = Float64Array.of(
    1,
    0,
    0.3,
    0.2,
    0.1,
    0,
    0.3,
    -0.2,
    1.5,
    0,
    0,
    0.25,
    0.1,
    0,
    0,
    -0.25,
    0.8,
    0,
  );
  const noise = {
    covariance,
    readouts: 8,
    samplesPerReadout: 512,
    dwellSeconds: 20e-6,
    relativeReceiverNoiseBandwidth: 0.79,
  };
  const options = { ...small, coils: 3, dwellSeconds: 5e-6, noise };

  test("has the given covariance in the image readouts", () => {
    const noisy = samplesOf(resolveAcquisition(options)).slice(noise.readouts);
    const clean = samplesOf(resolveAcquisition({ ...options, noise: { sigma: 0 } }));
    const differences = noisy.map((samples, i) =>
      samples.map((value, k) => value - (clean[i]?.[k] ?? Number.NaN)),
    );
    const { covariance: found, count } = covarianceOf(differences, 3);
    expect(count).toBe(64 * 32);
    expectCovariance(found, covariance, 3, count);
  });

  test("is scaled by dwell time and receiver bandwidth in the noise readouts", () => {
    const readouts = samplesOf(resolveAcquisition(options)).slice(0, noise.readouts);
    const { covariance: found, count } = covarianceOf(readouts, 3);
    expect(count).toBe(4096);
    const factor = 20 / 5 / 0.79; // what a reader multiplies by: dwell_noise / dwell_image / bandwidth
    expectCovariance(
      found.map((value) => value * factor),
      covariance,
      3,
      count,
    );
  });

  test("is correlated by default, and deviates by sigma in coil 0", () => {
    const a = resolveAcquisition({
      ...small,
      coils: 5,
      noise: { sigma: 0.3, readouts: 16, samplesPerReadout: 256 },
    });
    const { covariance: found, count } = covarianceOf(samplesOf(a).slice(0, 16), 5);
    expectCovariance(found, defaultCovariance(5, 0.3), 5, count);
    expect(a.noise.covariance[0]).toBeCloseTo(2 * 0.3 ** 2, 14);
  });

  test("is refused where its covariance is none", () => {
    const refused = (wrong: Float64Array) => () =>
      resolveAcquisition({ ...small, coils: 3, noise: { covariance: wrong } });
    expect(refused(covariance.with(3, -0.2))).toThrow(UsageError); // not Hermitian
    expect(refused(covariance.with(16, -0.8))).toThrow(UsageError); // not positive
    expect(refused(covariance.slice(2))).toThrow(UsageError);
  });
});

test("the default covariance is Hermitian and positive for any number of coils", () => {
  for (const coils of [1, 2, 7, 64]) {
    expect(isHermitian(defaultCovariance(coils, 1), coils)).toBe(true);
    expect(() => resolveAcquisition({ ...small, coils })).not.toThrow();
  }
});
