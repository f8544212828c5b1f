import { describe, expect, it } from "vitest";
import { between, fillUnknown } from "../../src/kernels/fill.js";
import { smoothMap } from "../../src/kernels/smooth.js";
import { smoothField } from "../../src/kernels/smooth-field.js";
import { seededNormal } from "./seeded-normal.js";

const [ROWS, COLUMNS] = [21, 24];
const surface = (i: number) => {
  const [y, x] = [Math.floor(i / COLUMNS) - 10, (i % COLUMNS) - 12];
  return 40 - 2 * x + 3 * y + 0.3 * x * x - 0.2 * x * y + 0.1 * y * y;
};
const map = Float32Array.from({ length: ROWS * COLUMNS }, (_, i) => surface(i));

describe("smoothMap", () => {
  it("returns a quadratic surface, at edges and beside holes too", () => {
    const weights = map.map((_, i) => (i % 7 === 3 ? 0 : 1 + (i % 5)));
    const values = map.map((value, i) => (weights[i] ? value : 1e6)); // what has no weight is not read
    const { values: smooth } = smoothMap(values, weights, ROWS, COLUMNS, 2, false);
    // the ridge of 1e-3 on slope and curvature shows at corners, where they carry the most: 0.15 of a range of 130
    for (let i = 0; i < map.length; i++) expect(Math.abs(smooth[i]! - surface(i))).toBeLessThan(0.15);
  });

  it("keeps a constant exactly and says where it had data", () => {
    const weights = map.map((_, i) => (i % COLUMNS < 12 ? 2 : 0));
    const { values, standardErrors, coverage } = smoothMap(
      map.fill(5).slice(),
      weights,
      ROWS,
      COLUMNS,
      1.5,
      true,
    );
    for (let i = 0; i < map.length; i++) map[i] = surface(i);
    const row = 10 * COLUMNS;
    expect(values[row + 6]).toBeCloseTo(5, 6);
    expect(coverage[row + 4]).toBeCloseTo(1, 6);
    expect(coverage[row + 11]! + coverage[row + 12]!).toBeCloseTo(1, 6); // either side of a straight edge
    expect(coverage[row + 20]).toBe(0);
    expect(standardErrors[row + 20]).toBe(Number.POSITIVE_INFINITY);
  });

  it("states the standard error that noise of the given weights has", () => {
    const normal = seededNormal(3);
    const weights = map.map((_, i) => 1 / (1 + (i % 3)) ** 2);
    const places = [10 * COLUMNS + 12, 5 * COLUMNS, ROWS * COLUMNS - 1];
    const sums = places.map(() => 0);
    const trials = 400;
    let stated: Float32Array = new Float32Array(0);
    for (let t = 0; t < trials; t++) {
      const noisy = weights.map((weight) => normal() / Math.sqrt(weight));
      const { values, standardErrors } = smoothMap(noisy, weights, ROWS, COLUMNS, 2, true);
      for (const [j, i] of places.entries()) sums[j]! += values[i]! ** 2;
      stated = standardErrors;
    }
    for (const [j, i] of places.entries()) {
      const ratio = Math.sqrt(sums[j]! / trials) / stated[i]!;
      expect(Math.abs(ratio - 1)).toBeLessThan(4 / Math.sqrt(2 * trials)); // four standard errors of a deviation from 400 trials
    }
  });

  it("gives the same values at every second pixel as at all", () => {
    const weights = map.map(() => 1);
    const all = smoothMap(map, weights, ROWS, COLUMNS, 2, false).values;
    const some = smoothMap(map, weights, ROWS, COLUMNS, 2, false, 2).values;
    for (let y = 0; y < 11; y++)
      for (let x = 0; x < 12; x++) expect(some[y * 12 + x]).toBe(all[2 * y * COLUMNS + 2 * x]);
  });
});

describe("smoothField", () => {
  it.each([0, 1, 2])("extends the measured part over the grid, window %f", (sigmaPixels) => {
    const weights = map.map((_, i) =>
      ((i % COLUMNS) - 12) ** 2 + (Math.floor(i / COLUMNS) - 10) ** 2 < 50 ? 4 : 0,
    );
    const { fieldHz, standardErrorHz } = smoothField(map, weights, ROWS, COLUMNS, sigmaPixels);
    for (let i = 0; i < map.length; i++) {
      expect(Number.isFinite(fieldHz[i]) && Number.isFinite(standardErrorHz[i])).toBe(true);
      if (weights[i]! > 0) expect(Math.abs(fieldHz[i]! - surface(i))).toBeLessThan(1.5); // at the rim, where the surface falls by 7 per pixel and the cubic between every second pixel reaches into the extended part
    }
    const range = [...map].filter((_, i) => weights[i]! > 0);
    expect(Math.max(...fieldHz)).toBeLessThan(Math.max(...range) + 20);
    expect(Math.min(...fieldHz)).toBeGreaterThan(Math.min(...range) - 20);
  });
});

describe("fillUnknown", () => {
  it("keeps what is known and continues it", () => {
    const known = map.map((_, i) => (i % 11 === 0 ? 1 : 0));
    const filled = map.slice();
    fillUnknown(filled, known, ROWS, COLUMNS);
    for (let i = 0; i < map.length; i++) if (known[i]) expect(filled[i]).toBe(map[i]);
    const flat = map.map((_, i) => (known[i] ? 3 : Number.NaN));
    fillUnknown(flat, known, ROWS, COLUMNS);
    expect(flat.every((value) => Math.abs(value - 3) < 1e-5)).toBe(true); // float32
    const nothing = map.slice();
    fillUnknown(nothing, new Uint8Array(map.length), ROWS, COLUMNS);
    expect(nothing.every((value) => value === 0)).toBe(true);
  });

  it("reads between pixels", () => {
    expect(between([0, 2, 4, 6], 2, 2, 0.5, 0.25)).toBe(2.5);
    expect(between([0, 2, 4, 6], 2, 2, -3, 9)).toBe(2);
  });
});
