import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, expect, test } from "vitest";
import { readScan } from "../../src/engine/scan.js";
import { noiseCovarianceFactor, rssNoiseMean } from "../../src/physics/noise-statistics.js";
import { simulateRaw } from "../../src/simulate/index.js";
import { readNpy } from "../../src/writers/npy.js";
import { reconstructed } from "../support/reconstruct.js";

const folder = mkdtempSync(path.join(tmpdir(), "carillon-noise-"));
afterAll(() => rmSync(folder, { recursive: true }));

test("the covariance of multislice-noise is the true one within what 1024 samples allow", async () => {
  const { facts } = await readScan("data/conformance/multislice-noise.h5");
  const truth = readNpy("data/conformance/multislice-noise.noise-covariance.npy").data as Float64Array;
  const noise = facts.noise!;
  expect(noise.samples).toBe(1024);
  const scale = noiseCovarianceFactor(
    noise.dwellSeconds,
    facts.dwellSeconds,
    facts.relativeReceiverNoiseBandwidth,
  );
  // an element's standard error is sqrt(C_aa C_bb / N): 3 % of the diagonal; four of them
  for (let a = 0; a < 4; a++)
    for (let b = 0; b < 4; b++) {
      const at = 2 * (4 * a + b);
      const bound = 4 * Math.sqrt((truth[10 * a]! * truth[10 * b]!) / 1024);
      expect(
        Math.hypot(
          noise.covariance[at]! * scale - truth[at]!,
          noise.covariance[at + 1]! * scale - truth[at + 1]!,
        ),
      ).toBeLessThan(bound);
    }
});

/** A file without signal: a disc of no size is not to be had, so the noise is a thousand times the object. */
async function noiseOnly(name: string, coils: number): Promise<string> {
  const file = path.join(folder, name);
  await simulateRaw({
    file,
    phantom: "disc",
    matrix: { x: 96, y: 96 },
    coils,
    slices: 1,
    noise: {
      sigma: 1000,
      readouts: 16,
      samplesPerReadout: 1024,
      dwellSeconds: 10e-6,
      relativeReceiverNoiseBandwidth: 0.79,
    },
    dwellSeconds: 5e-6,
    seed: 8,
  });
  return file;
}

test("whitened noise has unit variance in each part, and the RSS of noise its known mean", async () => {
  const coils = 4;
  const { coils: images, result, noise } = await reconstructed(await noiseOnly("white.h5", coils));
  const pixels = 96 * 96;
  for (let coil = 0; coil < coils; coil++)
    for (const part of [0, 1]) {
      let sum = 0;
      for (let i = 0; i < pixels; i++) sum += images[2 * (coil * pixels + i) + part]! ** 2;
      // variance of a variance: 2/n from the image, and 1/N = 1/16384 from the noise readouts; four standard errors
      expect(Math.abs(sum / pixels - 1)).toBeLessThan(4 * Math.sqrt(2 / pixels + 1 / 16384));
    }
  expect(noise).toEqual({ whitened: true, gain: 1 });
  // CHECKS: RSS of n = 4 channels of noise, mean 2.74162 sigma, std 0.69534 sigma (computed with SciPy)
  const mean = result.reduce((total, value) => total + value, 0) / pixels;
  expect(rssNoiseMean(4)).toBeCloseTo(2.74162, 5);
  expect(Math.abs(mean - 2.74162)).toBeLessThan(
    4 * (0.69534 / Math.sqrt(pixels) + 2.74162 / 2 / Math.sqrt(4 * 16384)),
  );
});

test("a window lowers the noise by its noise factor, and the stated gain says so", async () => {
  const { coils: images, noise } = await reconstructed(await noiseOnly("hann.h5", 2), [
    "apodize.window=hann",
  ]);
  // Hann: <w^2> = 0.375 along each of two axes (computed with NumPy)
  expect(noise.gain).toBeCloseTo(0.375, 8); // the window is applied as float32
  const variance = images.reduce((total, value) => total + value * value, 0) / images.length;
  // neighbouring pixels are correlated: about 1 / 0.375^2 fewer independent ones; four standard errors
  const independent = images.length * 0.375 ** 2;
  expect(Math.abs(variance / 0.375 ** 2 - 1)).toBeLessThan(4 * Math.sqrt(2 / independent + 1 / 16384));
});

test("averages lower the noise: the gain of two averages is 1 / sqrt(2)", async () => {
  const { noise } = await reconstructed("data/conformance/multislice-noise.h5");
  expect(noise.whitened).toBe(true);
  expect(noise.gain).toBeCloseTo(Math.SQRT1_2, 12);
});
