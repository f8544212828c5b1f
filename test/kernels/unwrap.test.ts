import { describe, expect, it } from "vitest";
import { unwrapPhase, wrapped } from "../../src/kernels/unwrap.js";
import { seededNormal } from "./seeded-normal.js";

const SIZE = { slices: 3, rows: 20, columns: 25 };
const COUNT = SIZE.slices * SIZE.rows * SIZE.columns;
const place = (i: number) => ({
  x: i % SIZE.columns,
  y: Math.floor(i / SIZE.columns) % SIZE.rows,
  z: Math.floor(i / (SIZE.columns * SIZE.rows)),
});

/** Whole turns between two maps over a mask: one number if the unwrapping is right. */
function turnsBetween(a: ArrayLike<number>, b: ArrayLike<number>, mask: ArrayLike<number>): Set<number> {
  const out = new Set<number>();
  for (let i = 0; i < b.length; i++)
    if (mask[i]) out.add(Math.round(((a[i]! - b[i]!) / (2 * Math.PI)) * 1e6) / 1e6 + 0);
  return out;
}

describe("unwrapPhase", () => {
  it("recovers a smooth phase of several turns in three dimensions", () => {
    const truth = Float64Array.from({ length: COUNT }, (_, i) => {
      const { x, y, z } = place(i);
      return 0.9 * x + 0.05 * y * y - 1.3 * z + 4 * Math.sin(x / 5);
    });
    const mask = new Uint8Array(COUNT).fill(1);
    const { radians, regionCount } = unwrapPhase(truth.map(wrapped), mask, SIZE);
    expect(regionCount).toBe(1);
    expect(turnsBetween(radians, truth, mask).size).toBe(1);
  });

  it("goes around noise: a noisy band crossed by a quiet bridge", () => {
    const normal = seededNormal(11);
    const truth = Float64Array.from({ length: COUNT }, (_, i) => 1.1 * place(i).x + 0.3 * place(i).y);
    const quiet = Uint8Array.from({ length: COUNT }, (_, i) => {
      const { x, y } = place(i);
      return x < 10 || x > 15 || y > 12 ? 1 : 0;
    });
    const noisy = truth.map((value, i) => wrapped(value + (quiet[i] ? 0 : 2 * normal())));
    const { radians } = unwrapPhase(noisy, new Uint8Array(COUNT).fill(1), SIZE);
    const inner = quiet.map((flag, i) =>
      flag && (place(i).x < 9 || place(i).x > 16 || place(i).y > 13) ? 1 : 0,
    );
    expect(turnsBetween(radians, truth, inner).size).toBe(1);
  });

  it("numbers regions that the mask does not connect, largest first, and leaves the rest alone", () => {
    const truth = Float64Array.from({ length: COUNT }, (_, i) => 0.8 * place(i).y);
    const mask = Uint8Array.from({ length: COUNT }, (_, i) => (place(i).x < 5 || place(i).x > 15 ? 1 : 0));
    const input = truth.map(wrapped);
    const { radians, regions, regionCount } = unwrapPhase(input, mask, SIZE);
    expect(regionCount).toBe(2);
    for (let i = 0; i < COUNT; i++) {
      const { x } = place(i);
      expect(regions[i]).toBe(x < 5 ? 1 : x > 15 ? 0 : -1);
      if (!mask[i]) expect(radians[i]).toBe(input[i]);
    }
    for (const region of [0, 1]) {
      expect(
        turnsBetween(
          radians,
          truth,
          regions.map((value) => (value === region ? 1 : 0)),
        ).size,
      ).toBe(1);
    }
  });
});
