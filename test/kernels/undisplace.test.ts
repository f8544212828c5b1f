import { describe, expect, it } from "vitest";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { planUndisplace } from "../../src/kernels/undisplace.js";
import { relativeL2 } from "./reference-transform.js";
import { magnitudes, maskedError, type SimulatedObject, simulateEcho } from "./simulated-echoes.js";

const engine = createPlainEngine();
const gaussian = (x: number, centre: number, sigma: number) => Math.exp(-0.5 * ((x - centre) / sigma) ** 2);

function sample(rows: number, length: number, value: (x: number, y: number) => number): Float32Array {
  return Float32Array.from({ length: rows * length }, (_, i) =>
    value((i % length) - Math.floor(length / 2), Math.floor(i / length)),
  );
}

function run(
  image: Float32Array,
  rows: number,
  inputLength: number,
  options: Parameters<typeof planUndisplace>[2],
) {
  const plan = planUndisplace(rows, inputLength, options);
  const out = new Float32Array(2 * rows * plan.outputLength);
  plan.apply(engine, image, out);
  return { plan, out, size: magnitudes(out) };
}

function object(length: number, slopeHz: number, centre: number): SimulatedObject {
  return {
    rows: 2,
    length,
    density: 1,
    water: (x) => gaussian(x, centre, 6),
    fieldHz: (x) => slopeHz * (x - centre) + slopeHz * centre,
  };
}

describe("planUndisplace", () => {
  // computed with NumPy (S8): Gaussian of deviation 6 px at x = 20, field 20 Hz per pixel, 390.625 Hz per pixel
  it.each([
    [20, 21.024, 0.951294],
    [-20, 18.976, 1.053963],
  ])("restores place and height under a slope of %i Hz per pixel", (slopeHz, seenAt, seenPeak) => {
    const length = 128;
    const image = simulateEcho(object(length, slopeHz, 20), { seconds: 0, pixelBandwidthHz: 390.625 });
    const before = magnitudes(image.subarray(0, 2 * length));
    expect(centroid(before)).toBeCloseTo(seenAt, 3);
    expect(Math.max(...before)).toBeCloseTo(seenPeak, 3); // read on whole pixels, within a thousandth of the top
    const displacementPixels = sample(2, length, (x) => (slopeHz * x) / 390.625);
    const { size, plan } = run(image, 2, length, { displacementPixels, jacobian: true });
    const truth = sample(2, length, (x) => gaussian(x, 20, 6));
    expect(relativeL2(size, truth)).toBeLessThan(1e-4); // kernel 2e-5, point sources one pixel apart
    expect(plan.foldedCount).toBe(0);
    const flat = run(image, 2, length, { displacementPixels, jacobian: false }).size;
    expect(flat[84]! / size[84]!).toBeCloseTo(1 / (1 + slopeHz / 390.625), 4); // conjugate phase alone keeps the density
  });

  it("conserves the sum along a line with the Jacobian, whatever the smooth field", () => {
    const length = 96;
    const field = (x: number) => 60 * Math.sin(x / 9);
    const image = simulateEcho(
      { ...object(length, 0, -4), fieldHz: field },
      { seconds: 0, pixelBandwidthHz: 200 },
    );
    const { out } = run(image, 2, length, {
      displacementPixels: sample(2, length, (x) => field(x) / 200),
      jacobian: true,
    });
    const sum = (z: Float32Array) =>
      z.subarray(0, 2 * length).reduce((total, value, i) => total + (i % 2 ? 0 : value), 0);
    // central differences of the displacement over one pixel: (1/9)^2 / 6 of its slope, weighted by the object
    expect(sum(out) / sum(image)).toBeCloseTo(1, 3);
  });

  it.each([150, -150])(
    "equals a shift for a constant field, either direction of reading (%i Hz per pixel)",
    (bandwidthHz) => {
      const length = 65;
      const image = simulateEcho(
        { ...object(length, 0, 3), fieldHz: () => 240 },
        { seconds: 0, pixelBandwidthHz: bandwidthHz },
      );
      expect(centroid(magnitudes(image.subarray(0, 2 * length)))).toBeCloseTo(3 + 240 / bandwidthHz, 3);
      const { size } = run(image, 2, length, {
        displacementPixels: new Float32Array(2 * length).fill(240 / bandwidthHz),
        jacobian: true,
      });
      expect(
        relativeL2(
          size.subarray(0, length),
          sample(1, length, (x) => gaussian(x, 3, 6)),
        ),
      ).toBeLessThan(1e-4);
    },
  );

  it("brings back from a wider image what was displaced beyond the output", () => {
    const [wide, narrow] = [64, 32];
    const image = simulateEcho(
      { ...object(wide, 0, 0), water: (x) => gaussian(x, 14, 1.5), fieldHz: () => 500 },
      { seconds: 0, pixelBandwidthHz: 100 },
    );
    const { size, plan } = run(image, 2, wide, {
      displacementPixels: new Float32Array(2 * narrow).fill(5),
      jacobian: true,
    });
    expect(plan.outsideCount).toBe(0);
    expect(
      relativeL2(
        size,
        sample(2, narrow, (x) => gaussian(x, 14, 1.5)),
      ),
    ).toBeLessThan(1e-4);
    const cropped = new Float32Array(2 * 2 * narrow);
    for (let y = 0; y < 2; y++)
      cropped.set(image.subarray(2 * (y * wide + 16), 2 * (y * wide + 48)), 2 * y * narrow);
    const lost = run(cropped, 2, narrow, {
      displacementPixels: new Float32Array(2 * narrow).fill(5),
      jacobian: true,
    });
    expect(lost.plan.outsideCount).toBe(2 * 5);
  });

  it("invents nothing where the map folds", () => {
    const displacementPixels = sample(1, 32, (x) => (Math.abs(x) < 4 ? -1.5 * x : 0));
    const image = new Float32Array(64).fill(1);
    const { plan, size } = run(image, 1, 32, { displacementPixels, jacobian: true });
    expect(plan.foldedCount).toBeGreaterThan(6);
    expect(plan.foldedCount).toBe(plan.folded.reduce((n, flag) => n + flag, 0));
    for (let x = 0; x < 32; x++) expect(size[x] === 0).toBe(plan.folded[x] === 1);
  });

  it("regains with the accrued phase the frequencies that a steep phase moved out of the middle", () => {
    // rows alike: these are not resolved by k-space here
    const [rows, length] = [8, 64];
    const field = (x: number) => 200 * Math.exp(-(x * x) / 200);
    const block = (x: number) => (Math.abs(x) <= 14 ? 1 : 0);
    const shape = { rows, length, density: 3, water: block };
    const image = simulateEcho({ ...shape, fieldHz: field }, { seconds: 0.006, pixelBandwidthHz: 200 });
    const truth = magnitudes(
      simulateEcho({ ...shape, fieldHz: () => 0 }, { seconds: 0, pixelBandwidthHz: 200 }),
    );
    const mask = truth.map((value) => (value > 0.2 ? 1 : 0));
    const fieldHz = sample(rows, length, field);
    const displacementPixels = fieldHz.map((hz) => hz / 200);
    const plain = run(image, rows, length, { displacementPixels, jacobian: true }).size;
    const accrued = { fieldHz, echoSeconds: 0.006 };
    const better = run(image, rows, length, { displacementPixels, jacobian: true, accrued }).size;
    // what stays is the part of the band beyond its edge, never sampled
    expect(maskedError(better, truth, mask)).toBeLessThan(0.8 * maskedError(plain, truth, mask));
    expect(maskedError(plain, truth, mask)).toBeLessThan(0.03);
  });

  it("leaves an image alone with no displacement, odd sizes too", () => {
    const image = simulateEcho({ ...object(33, 0, 2), rows: 5 }, { seconds: 0, pixelBandwidthHz: 100 });
    const nothing = new Float32Array(5 * 33);
    for (const accrued of [undefined, { fieldHz: nothing, echoSeconds: 0.01 }]) {
      const { out } = run(image, 5, 33, {
        displacementPixels: nothing,
        jacobian: true,
        ...(accrued && { accrued }),
      });
      expect(relativeL2(out, image)).toBeLessThan(2e-5); // the kernel's error
    }
  });

  it("refuses maps that do not fit", () => {
    expect(() => planUndisplace(3, 8, { displacementPixels: new Float32Array(25), jacobian: true })).toThrow(
      RangeError,
    );
  });
});

function centroid(row: Float32Array): number {
  let [sum, moment] = [0, 0];
  const length = row.length;
  for (let x = 0; x < length; x++) {
    sum += row[x]!;
    moment += row[x]! * (x - Math.floor(length / 2));
  }
  return moment / sum;
}
