import { describe, expect, it } from "vitest";
import { type FieldMapOptions, measureField } from "../../src/kernels/field-map.js";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { seededNormal } from "./seeded-normal.js";
import { addNoise, simulateEcho } from "./simulated-echoes.js";

const engine = createPlainEngine();
const [ROWS, LENGTH] = [40, 48];
const GRID = { slices: 1, rows: ROWS, columns: LENGTH };
const inside = (x: number, y: number, radius: number) => x * x + (y - ROWS / 2) ** 2 < radius * radius;
const at = (i: number) => [(i % LENGTH) - LENGTH / 2, Math.floor(i / LENGTH)] as const;
const disc = (radius: number) =>
  Uint8Array.from({ length: ROWS * LENGTH }, (_, i) => (inside(...at(i), radius) ? 1 : 0));

function echoes(
  seconds: readonly number[],
  bandwidths: readonly number[],
  fieldHz: (x: number, y: number) => number,
) {
  const water = (x: number, y: number) => (inside(x, y, 16) ? 1 : 0);
  return seconds.map((time, e) =>
    simulateEcho(
      { rows: ROWS, length: LENGTH, density: 3, water, fieldHz },
      { seconds: time, pixelBandwidthHz: bandwidths[e]! },
    ),
  );
}

function options(echoSeconds: readonly number[], pixelBandwidthHz: readonly number[]): FieldMapOptions {
  return { echoSeconds, pixelBandwidthHz, noiseDeviation: 0.01, mask: disc(16), smoothingPixels: 2 };
}

/** Pixels of constant magnitude 1 and the phases of the given field. */
function flatEcho(seconds: number, fieldHz: number, count: number): Float32Array {
  const angle = -2 * Math.PI * fieldHz * seconds;
  return Float32Array.from({ length: 2 * count }, (_, i) => (i % 2 ? Math.sin(angle) : Math.cos(angle)));
}

function flatField(seconds: readonly number[], fieldHz: number, change: Partial<FieldMapOptions> = {}) {
  const count = 8 * 9;
  const still = seconds.map(() => Number.POSITIVE_INFINITY);
  return measureField(
    engine,
    seconds.map((time) => flatEcho(time, fieldHz, count)),
    { slices: 1, rows: 8, columns: 9 },
    {
      ...options(seconds, still),
      mask: new Uint8Array(count).fill(1),
      smoothingPixels: 0,
      ...change,
    },
  );
}

describe("measureField", () => {
  it("has the sign, the range and the wrap of the definition [computed with NumPy: S8]", () => {
    const map = flatField([0.005, 0.00746], 150);
    expect(map.wrapLimitHz).toBeCloseTo(203.252, 3);
    expect(map.fieldHz[40]).toBeCloseTo(150, 3); // float32 phases
    expect(flatField([0.005, 0.00746], 250).fieldHz[40]).toBeCloseTo(-156.504, 3);
    expect(flatField([0, 0.001], 1).wrapLimitHz).toBeCloseTo(500, 9);
  });

  it("states 1.830 Hz for dTE 2.46 ms and SNR 50 [computed with NumPy: S8]", () => {
    expect(flatField([0, 0.00246], 10, { noiseDeviation: 1 / 50 }).standardErrorHz[40]).toBeCloseTo(1.83, 3);
  });

  it("gains with more echoes as the spread of their times says", () => {
    const seconds = [0.002, 0.003, 0.005, 0.009];
    const mean = 0.00475;
    const spread = seconds.reduce((sum, time) => sum + (time - mean) ** 2, 0);
    const map = flatField(seconds, 320, { noiseDeviation: 0.02 }); // beyond the limit of all pairs but the first
    expect(map.fieldHz[40]).toBeCloseTo(320, 3);
    expect(map.standardErrorHz[40]).toBeCloseTo(0.02 / (2 * Math.PI * Math.sqrt(spread)), 5); // slope of a straight line
  });

  it.each([[[200, 200]], [[-200, -200]], [[200, -200]]])(
    "is in the object's coordinates for bandwidths %j",
    (bandwidths) => {
      // up to 1.2 px of displacement, and phases that wrap: the limit is 167 Hz, the range 400
      const field = (x: number, y: number) =>
        400 * Math.exp(-((x - 3) ** 2 + (y - 20) ** 2) / 250) - 3 * x - 160;
      const seconds = [0.004, 0.007];
      const map = measureField(
        engine,
        echoes(seconds, bandwidths, field),
        GRID,
        options(seconds, bandwidths),
      );
      const errors: number[] = [];
      for (let i = 0; i < map.fieldHz.length; i++)
        if (inside(...at(i), 14)) errors.push(Math.abs(map.fieldHz[i]! - field(...at(i))));
      errors.sort((a, b) => a - b);
      expect(map.foldedCount).toBe(0);
      // what the smoothing takes off the top of the bump (its fourth derivative) and the ringing at the object's edge
      expect(errors[Math.floor(errors.length / 2)]).toBeLessThan(0.5);
      expect(errors[Math.floor(errors.length * 0.95)]).toBeLessThan(3);
    },
  );

  it("settles whole turns of separate parts and through slices", () => {
    const grid = { slices: 3, rows: 12, columns: 30 };
    const count = 3 * 12 * 30;
    const truth = (i: number) => -230 + 9 * (i % 30) + 25 * Math.floor(i / 360);
    const mask = Uint8Array.from({ length: count }, (_, i) => (i % 30 < 12 || i % 30 > 16 ? 1 : 0));
    const images = [0, 0.005].map((seconds) => {
      const out = new Float32Array(2 * count);
      for (let i = 0; i < count; i++) out.set(flatEcho(seconds, truth(i), 1), 2 * i);
      return out;
    });
    const still = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY];
    const map = measureField(engine, images, grid, {
      ...options([0, 0.005], still),
      mask,
      smoothingPixels: 0,
    });
    for (let i = 0; i < count; i++) if (mask[i]) expect(map.fieldHz[i]).toBeCloseTo(truth(i), 2); // limit 100 Hz, range 310
  });

  it("settles the turns of an island across a wide gap, in noise and on a slope", () => {
    const grid = { slices: 1, rows: 24, columns: 100 };
    const count = 24 * 100;
    const truth = (i: number) => -400 + 9 * (i % 100) - 4 * Math.floor(i / 100); // the limit is 100 Hz
    const mask = Uint8Array.from({ length: count }, (_, i) => {
      const [x, y] = [i % 100, Math.floor(i / 100)];
      return x < 40 || ((x - 92) ** 2 < 3 && (y - 12) ** 2 < 3) ? 1 : 0;
    });
    const normal = seededNormal(41);
    const images = [0, 0.005].map((seconds) => {
      const out = new Float32Array(2 * count);
      for (let i = 0; i < count; i++) out.set(flatEcho(seconds, truth(i), 1), 2 * i);
      return addNoise(out, 0.15, normal);
    });
    const still = [Number.POSITIVE_INFINITY, Number.POSITIVE_INFINITY];
    const set = { ...options([0, 0.005], still), noiseDeviation: 0.15, mask, smoothingPixels: 0 };
    const map = measureField(engine, images, grid, set);
    // Which turn the largest part is in nobody can say; the island must be in the same.
    const off = Math.round((map.fieldHz[1210]! - truth(1210)) / 200) * 200;
    for (let i = 0; i < count; i++)
      if (mask[i]) expect(Math.abs(map.fieldHz[i]! - truth(i) - off)).toBeLessThan(60); // 7 Hz of noise
  });

  it("errs at SNR 30 as it states, within 20 %", () => {
    const normal = seededNormal(29);
    const seconds = [0.004, 0.0064];
    const clean = echoes(seconds, [300, 300], (x, y) => 2 * x - y);
    const set = { ...options(seconds, [300, 300]), noiseDeviation: 1 / 30 };
    const trials = 30;
    const reference = measureField(engine, clean, GRID, set).fieldHz; // the edges' ringing is not noise
    for (const smoothingPixels of [0, 2]) {
      let [sum, count] = [0, 0];
      const bare =
        smoothingPixels === 0
          ? measureField(engine, clean, GRID, { ...set, smoothingPixels }).fieldHz
          : reference;
      for (let t = 0; t < trials; t++) {
        const noisy = clean.map((image) => addNoise(image, 1 / 30, normal));
        const map = measureField(engine, noisy, GRID, { ...set, smoothingPixels });
        for (let i = 0; i < bare.length; i++) {
          if (!inside(...at(i), 13)) continue;
          sum += ((map.fieldHz[i]! - bare[i]!) / map.standardErrorHz[i]!) ** 2;
          count++;
        }
      }
      const ratio = Math.sqrt(sum / count);
      expect(ratio).toBeGreaterThan(0.8);
      expect(ratio).toBeLessThan(1.2);
    }
  });

  it("masks and counts where the map cannot be inverted", () => {
    // seen field falling by 65 Hz per pixel at 40 Hz per pixel: places cross around x = 0
    const field = (x: number) => -130 * Math.tanh(x / 2);
    const images = [0, 0.001].map((time) => {
      const out = new Float32Array(2 * ROWS * LENGTH);
      for (let i = 0; i < ROWS * LENGTH; i++) out.set(flatEcho(time, field(at(i)[0]), 1), 2 * i);
      return out;
    });
    const gentle = { ...options([0, 0.001], [-400, -400]), smoothingPixels: 0 };
    expect(measureField(engine, images, GRID, gentle).foldedCount).toBe(0);
    const steep = measureField(engine, images, GRID, { ...gentle, pixelBandwidthHz: [-40, -40] });
    expect(steep.foldedCount).toBeGreaterThanOrEqual(ROWS / 2); // every row of the mask, here 31, crosses x = 0
    for (let y = 10; y < 30; y++) expect(steep.mask[y * LENGTH + LENGTH / 2]).toBe(0);
    expect(steep.mask[20 * LENGTH + 16]).toBe(1);
  });

  it("refuses equal echo times and missing numbers", () => {
    expect(() => flatField([0.001, 0.001], 5)).toThrow(RangeError);
    expect(() => flatField([0.001], 5)).toThrow(RangeError);
  });
});
