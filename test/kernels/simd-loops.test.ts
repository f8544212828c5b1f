import { describe, expect, it } from "vitest";
import { channelWeights, combineEchoes } from "../../src/kernels/combine-echoes.js";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { gatherRows, planRowWarp, scatterRows } from "../../src/kernels/row-warp.js";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { createSimdKernels } from "../../src/kernels/simd-kernels.js";
import { seededNormal } from "./seeded-normal.js";

const memory = new SampleMemory();
const simd = createSimdKernels(memory).transform;
const plain = createPlainEngine();
const normal = seededNormal(3);
const random = (count: number) => Float32Array.from({ length: count }, () => normal());

function difference(a: Float32Array, b: Float32Array): number {
  let [sum, norm] = [0, 0];
  for (let i = 0; i < b.length; i++) {
    sum += (a[i]! - b[i]!) ** 2;
    norm += b[i]! ** 2;
  }
  return a.length === b.length ? Math.sqrt(sum / norm) : Number.NaN;
}

/** An array in the shared memory. */
function inMemory(values: Float32Array): Float32Array {
  const copy = simd.allocate(values.length, false);
  copy.set(values);
  return copy;
}

/** Both sum in float32 here or float64 there, a few terms: some roundings of 6e-8. */
const ROUNDING = 1e-6;

describe.each([
  [16, 16],
  [15, 20],
  [105, 64],
])("rows of %i pixels read at %i places", (length, count) => {
  const rows = 5;
  // Places at both ends, where the grid is periodic, beyond them, on whole pixels and between.
  const places = Float32Array.from(
    { length: rows * count },
    (_, i) => ((i % count) - count / 2) * (1.04 * (length / count)) + (i % 7 === 0 ? 0 : 0.3 * Math.sin(i)),
  );
  const warp = planRowWarp(places, rows, length);

  it("gather as the plain loops do, into the memory and out of it", () => {
    const image = random(2 * rows * length);
    const expected = new Float32Array(2 * rows * count);
    gatherRows(plain, warp, image, expected);
    const outside = new Float32Array(expected.length);
    gatherRows(simd, warp, image, outside);
    expect(difference(outside, expected)).toBeLessThan(ROUNDING);
    const inside = simd.allocate(expected.length, false).fill(9);
    gatherRows(simd, warp, inMemory(image), inside);
    expect(inside).toEqual(outside);
    expect(warp.outside).toBeGreaterThan(0);
    places.forEach((place, i) => void (Math.abs(place) > length / 2 + 1 && expect(outside[2 * i]).toBe(0)));
  });

  it("scatter as the plain loops do", () => {
    const values = random(2 * rows * count);
    const expected = new Float32Array(2 * rows * length);
    scatterRows(plain, warp, values, expected);
    const found = new Float32Array(expected.length);
    scatterRows(simd, warp, values, found);
    expect(difference(found, expected)).toBeLessThan(ROUNDING);
  });
});

describe("combined echoes", () => {
  it.each([12, 13])("are those of the plain loop, rows of %i", (columns) => {
    const [coils, rows] = [3, 9];
    const size = 2 * coils * rows * columns;
    const images = [random(size), random(size)];
    const at = (data: Float32Array) => ({
      data,
      start: 0,
      coilStride: 2 * rows * columns,
      rowStride: 2 * columns,
    });
    const weights = channelWeights(images.map(at), coils, rows, columns);
    const expected = combineEchoes(images.map(at), weights, rows, columns, plain);
    const found = combineEchoes(
      images.map((image) => at(inMemory(image))),
      weights,
      rows,
      columns,
      simd,
    );
    found.forEach((image, e) => void expect(difference(image, expected[e]!)).toBeLessThan(ROUNDING));
    // From arrays elsewhere the plain loop runs.
    const elsewhere = combineEchoes(images.map(at), weights, rows, columns, simd);
    elsewhere.forEach((image, e) => void expect(difference(image, expected[e]!)).toBeLessThan(ROUNDING));
  });
});

describe("products", () => {
  it.each([8, 9])("complex ones of %i samples, and rows times a gain", (count) => {
    const [values, factors, gain] = [random(2 * 3 * count), random(2 * 3 * count), random(count)];
    const inside = inMemory(values);
    expect(simd.loops.multiplyComplex(inside, factors)).toBe(true);
    const product = values.map((_, i) => {
      const [a, b, c, d] = [values[i & ~1]!, values[i | 1]!, factors[i & ~1]!, factors[i | 1]!];
      return i % 2 ? a * d + b * c : a * c - b * d;
    });
    expect(difference(inside, product)).toBeLessThan(ROUNDING);
    expect(simd.loops.scaleRows(inside, gain)).toBe(true);
    expect(
      difference(
        inside,
        product.map((value, i) => value * gain[Math.floor(i / 2) % count]!),
      ),
    ).toBeLessThan(ROUNDING);
    expect(simd.loops.multiplyComplex(values, factors)).toBe(false); // elsewhere: the caller does it
  });
});

it("memory is given back, but for what the last few plans hold", () => {
  const gather = () =>
    gatherRows(simd, planRowWarp(new Float32Array(40), 2, 20), random(80), new Float32Array(80));
  for (let i = 0; i < 8; i++) gather();
  const before = memory.usedBytes;
  for (let i = 0; i < 9; i++) gather();
  expect(memory.usedBytes).toBe(before);
});
