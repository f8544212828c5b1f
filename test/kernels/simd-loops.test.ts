import { describe, expect, it } from "vitest";
import { PLAIN_LOOPS } from "../../src/kernels/plain-loops.js";
import { planRowWarp } from "../../src/kernels/row-warp.js";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { createSimdKernels } from "../../src/kernels/simd-kernels.js";
import { seededNormal } from "./seeded-normal.js";

const memory = new SampleMemory();
const simd = createSimdKernels(memory).transform;
const normal = seededNormal(3);
const random = (count: number) => Float32Array.from({ length: count }, () => normal());

/** An array in the shared memory. */
function inMemory(values: Float32Array): Float32Array {
  const copy = simd.allocate(values.length, false);
  copy.set(values);
  return copy;
}

// Each with values in the memory, where SIMD runs, and elsewhere: the bits of the plain loops, whoever runs.
describe.each([
  [16, 16],
  [15, 20],
  [105, 64],
])("rows of %i pixels at %i places", (length, count) => {
  const rows = 5;
  // Places at both ends, where the grid is periodic, beyond them, on whole pixels and between.
  const places = Float32Array.from(
    { length: rows * count },
    (_, i) => ((i % count) - count / 2) * 1.04 * (length / count) + (i % 7 === 0 ? 0 : 0.3 * Math.sin(i)),
  );
  const { taps, outside } = planRowWarp(places, rows, length);
  const grid = random(2 * rows * 2 * length);

  it("gather: the same bits as the plain loop", () => {
    const expected = new Float32Array(2 * rows * count);
    PLAIN_LOOPS.gatherTaps(grid, taps, rows, expected);
    const found = new Float32Array(expected.length);
    simd.loops.gatherTaps(inMemory(grid), taps, rows, found);
    expect(found).toEqual(expected);
    const inside = simd.allocate(expected.length, false).fill(9);
    simd.loops.gatherTaps(inMemory(grid), taps, rows, inside);
    expect(inside).toEqual(expected);
    const elsewhere = new Float32Array(expected.length);
    simd.loops.gatherTaps(grid, taps, rows, elsewhere);
    expect(elsewhere).toEqual(expected);
    expect(outside).toBeGreaterThan(0);
    places.forEach((place, i) => void (Math.abs(place) > length / 2 + 1 && expect(found[2 * i]).toBe(0)));
  });

  it("scatter: the same bits as the plain loop, and the transpose of gather", () => {
    const values = random(2 * rows * count);
    const expected = random(grid.length);
    const start = inMemory(expected);
    PLAIN_LOOPS.scatterTaps(expected, taps, rows, values);
    simd.loops.scatterTaps(start, taps, rows, values);
    expect(start).toEqual(expected);
    // <gather g, v> = <g, scatter v>, float32 sums of some hundred products
    const [gathered, scattered] = [new Float32Array(values.length), new Float32Array(grid.length)];
    PLAIN_LOOPS.gatherTaps(grid, taps, rows, gathered);
    PLAIN_LOOPS.scatterTaps(scattered, taps, rows, values);
    const product = (a: Float32Array, b: Float32Array) => a.reduce((sum, value, i) => sum + value * b[i]!, 0);
    expect(Math.abs(product(gathered, values) - product(grid, scattered))).toBeLessThan(1e-4);
  });
});

describe("products", () => {
  it.each([8, 9])("of %i samples: the same bits as the plain loops", (count) => {
    const [values, factors, gain] = [random(6 * count), random(6 * count), random(count)];
    const inside = inMemory(values);
    simd.loops.multiplyComplex(inside, factors);
    PLAIN_LOOPS.multiplyComplex(values, factors);
    expect(inside).toEqual(values);
    simd.loops.scaleRows(inside, gain);
    PLAIN_LOOPS.scaleRows(values, gain);
    expect(inside).toEqual(values);
    const [source, weights, target] = [random(8 * count), random(2 * count), random(8 * count)];
    const sum = inMemory(target);
    simd.loops.addWeighted(inMemory(source), 2 * count, inMemory(weights), sum, 4 * count);
    PLAIN_LOOPS.addWeighted(source, 2 * count, weights, target, 4 * count);
    expect(sum).toEqual(target);
  });

  it("(1 + 2i)(3 + 4i) = -5 + 10i; conj(1 + 2i)(3 + 4i) = 11 - 2i", () => {
    const values = Float32Array.of(1, 2);
    PLAIN_LOOPS.multiplyComplex(values, Float32Array.of(3, 4));
    expect([...values]).toEqual([-5, 10]);
    const sum = new Float32Array(2);
    PLAIN_LOOPS.addWeighted(Float32Array.of(3, 4), 0, Float32Array.of(1, 2), sum, 0);
    expect([...sum]).toEqual([11, -2]);
  });
});

it("memory is given back, but for what the last few plans hold", () => {
  const gather = () => {
    const grid = simd.allocate(160);
    simd.loops.gatherTaps(grid, planRowWarp(new Float32Array(40), 2, 20).taps, 2, new Float32Array(80));
    simd.release(grid);
  };
  for (let i = 0; i < 8; i++) gather();
  const before = memory.usedBytes;
  for (let i = 0; i < 9; i++) gather();
  expect(memory.usedBytes).toBe(before);
});
