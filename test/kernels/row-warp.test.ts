import { describe, expect, it } from "vitest";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { gatherRows, planRowWarp, scatterRows } from "../../src/kernels/row-warp.js";
import { shiftLines } from "../../src/kernels/shift.js";
import { naiveTransform, relativeL2, seededSamples } from "./reference-transform.js";

const engine = createPlainEngine();
const ROWS = 3;

function placesWithin(length: number, count: number): Float32Array {
  const spread = seededSamples(ROWS * count, 7);
  return spread.map((value) => value * (length / 2 - 1));
}

/** `N^-1/2 sum_k S(k) exp(+i 2 pi k place / N)` of each row, and its transpose, by direct sums in float64. */
function directGather(image: Float32Array, places: Float32Array, length: number): Float64Array {
  const lines = naiveTransform({ source: image, outer: ROWS, inner: 1, length, inverse: false });
  const count = places.length / ROWS;
  const out = new Float64Array(2 * places.length);
  for (let i = 0; i < places.length; i++) {
    for (let j = 0; j < length; j++) {
      const angle = (2 * Math.PI * (j - Math.floor(length / 2)) * places[i]!) / length;
      const at = 2 * (Math.floor(i / count) * length + j);
      const [c, s] = [Math.cos(angle) / Math.sqrt(length), Math.sin(angle) / Math.sqrt(length)];
      out[2 * i]! += lines[at]! * c - lines[at + 1]! * s;
      out[2 * i + 1]! += lines[at]! * s + lines[at + 1]! * c;
    }
  }
  return out;
}

function directScatter(values: Float32Array, places: Float32Array, length: number): Float64Array {
  const count = places.length / ROWS;
  const out = new Float64Array(2 * ROWS * length);
  for (let i = 0; i < places.length; i++) {
    for (let j = 0; j < length; j++) {
      const angle = (-2 * Math.PI * (j - Math.floor(length / 2)) * places[i]!) / length;
      const at = 2 * (Math.floor(i / count) * length + j);
      const [c, s] = [Math.cos(angle) / Math.sqrt(length), Math.sin(angle) / Math.sqrt(length)];
      out[at]! += values[2 * i]! * c - values[2 * i + 1]! * s;
      out[at + 1]! += values[2 * i]! * s + values[2 * i + 1]! * c;
    }
  }
  return out;
}

describe("row warps", () => {
  // White rows are the hardest: all of the band up to the Nyquist frequency. The kernel's aliasing error there is 1.1e-5
  // [computed with NumPy: width 6, oversampling 2]; 2e-5 leaves room for float32.
  it.each([
    [16, 16],
    [15, 11],
    [64, 70],
  ])("read rows of %i pixels at %i places like the direct sum", (length, count) => {
    const image = seededSamples(2 * ROWS * length + 2).subarray(2);
    const places = placesWithin(length, count);
    const out = new Float32Array(2 * places.length);
    gatherRows(engine, planRowWarp(places, ROWS, length), image, out);
    expect(relativeL2(out, directGather(image, places, length))).toBeLessThan(2e-5);
  });

  it.each([
    [16, 16],
    [15, 11],
    [64, 70],
  ])("write rows of %i samples from %i places like the direct sum", (length, count) => {
    const places = placesWithin(length, count);
    const values = seededSamples(2 * places.length);
    const lines = new Float32Array(2 * ROWS * length);
    scatterRows(engine, planRowWarp(places, ROWS, length), values, lines);
    expect(relativeL2(lines, directScatter(values, places, length))).toBeLessThan(2e-5);
  });

  it("equal a shift where the displacement is constant", () => {
    const length = 32;
    const image = seededSamples(2 * ROWS * length);
    const places = Float32Array.from({ length: ROWS * length }, (_, i) => (i % length) - 16 + 2.3);
    const out = new Float32Array(image.length);
    gatherRows(engine, planRowWarp(places, ROWS, length), image, out);
    const job = { outer: ROWS, inner: 1, length };
    const lines = Float32Array.from(naiveTransform({ source: image, ...job, inverse: false }));
    const shifted = naiveTransform({ source: shiftLines(lines, length, -2.3), ...job, inverse: true });
    for (let row = 0; row < ROWS; row++) {
      const kept = [2 * row * length, 2 * (row * length + 30)] as const; // the last two places are outside
      expect(relativeL2(out.subarray(...kept), shifted.subarray(...kept))).toBeLessThan(2e-5);
    }
  });

  it("count places outside and read zero there", () => {
    const warp = planRowWarp([-4.6, -4.4, 0, 3.4, 3.6, Number.NaN], 1, 8);
    expect(warp.outside).toBe(3);
    const out = new Float32Array(12);
    gatherRows(engine, warp, seededSamples(16), out);
    expect([out[0], out[8], out[10]]).toEqual([0, 0, 0]);
    expect(out[2]).not.toBe(0);
  });
});
