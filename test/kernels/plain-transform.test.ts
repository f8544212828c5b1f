import { describe, expect, it } from "vitest";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import type { AxisTransform } from "../../src/kernels/transform.js";
import { naiveTransform, relativeL2, seededSamples } from "./reference-transform.js";

const engine = createPlainEngine();
const LENGTHS = [...Array.from({ length: 17 }, (_, i) => i + 1), 251, 256];

// Work is float64; the result is rounded once to float32, half a unit in the last place: 2^-25 = 3e-8 at worst per
// value, so below 6e-8 in relative L2.
const ROUNDING = 6e-8;

function run(job: Omit<AxisTransform, "target">): Float32Array {
  const target = new Float32Array(2 * job.outer * (job.outputLength ?? job.length) * job.inner);
  engine.transformAxis({ ...job, target });
  return target;
}

describe("plain engine", () => {
  it.each(LENGTHS)("agrees with the O(n^2) sum, length %i, both directions", (length) => {
    for (const inverse of [false, true]) {
      const job = {
        source: seededSamples(2 * 2 * length * 3),
        outer: 2,
        inner: 3,
        length,
        inverse,
        scale: 1.5,
      };
      expect(relativeL2(run(job), naiveTransform(job))).toBeLessThan(ROUNDING);
    }
  });

  it.each([
    [16, 9, 16],
    [16, 16, 9],
    [15, 8, 6],
    [15, 7, 7],
    [7, 4, 5],
    [5, 1, 1],
    [1, 1, 1],
  ])(
    "crops and zero-fills about floor centres: length %i, input %i, output %i",
    (length, inputLength, outputLength) => {
      for (const inverse of [false, true]) {
        const source = seededSamples(2 * 3 * inputLength * 5);
        const job = { source, outer: 3, inner: 5, length, inputLength, outputLength, inverse };
        expect(relativeL2(run(job), naiveTransform(job))).toBeLessThan(ROUNDING);
      }
    },
  );

  // [computed with NumPy/SciPy]: a unit sample at floor(N/2) transforms to the flat, real N^-1/2 for odd and even N.
  it.each([4, 5, 7, 8, 255, 256])("turns the centre impulse into a flat real line, length %i", (length) => {
    const source = new Float32Array(2 * length);
    source[2 * Math.floor(length / 2)] = 1;
    const out = run({ source, outer: 1, inner: 1, length, inverse: false });
    for (let k = 0; k < length; k++) {
      expect(Math.abs(out[2 * k]! - length ** -0.5)).toBeLessThan(ROUNDING);
      expect(Math.abs(out[2 * k + 1]!)).toBeLessThan(ROUNDING);
    }
  });

  it("doubles the grid by zero-filling without changing the originals (even and odd)", () => {
    // [computed with NumPy/SciPy]: unitary x2: out[2j] sqrt(2) = in[j] for even N; out[2j+1] for odd N.
    for (const [n, parity] of [
      [16, 0],
      [15, 1],
    ] as const) {
      const image = seededSamples(2 * n);
      const kspace = run({ source: image, outer: 1, inner: 1, length: n, inverse: false });
      const fine = run({
        source: kspace,
        outer: 1,
        inner: 1,
        length: 2 * n,
        inputLength: n,
        inverse: true,
        scale: Math.SQRT2,
      });
      const kept = Float32Array.from(
        { length: 2 * n },
        (_, f) => fine[2 * (2 * (f >> 1) + parity) + (f & 1)]!,
      );
      // Two roundings to float32.
      expect(relativeL2(kept, image)).toBeLessThan(2 * ROUNDING);
    }
  });

  it("works in place and on views with a byte offset, leaving their surroundings alone", () => {
    const length = 9;
    const whole = seededSamples(2 * 4 * length * 2 + 6);
    const before = whole.slice();
    const view = whole.subarray(3, 3 + 2 * 4 * length * 2);
    const job = { source: view.slice(), outer: 4, inner: 2, length, inverse: true };
    engine.transformAxis({ ...job, source: view, target: view });
    expect(view).toEqual(run(job));
    expect([...whole.subarray(0, 3), ...whole.subarray(-3)]).toEqual([
      ...before.subarray(0, 3),
      ...before.subarray(-3),
    ]);
  });

  it("leaves the source unchanged", () => {
    const source = seededSamples(2 * 3 * 4 * 5);
    const copy = source.slice();
    run({ source, outer: 3, inner: 5, length: 4, inverse: false });
    expect(source).toEqual(copy);
  });

  it("refuses lengths and arrays that do not fit together", () => {
    const source = new Float32Array(2 * 8);
    const base = { source, target: source, outer: 1, inner: 1, length: 8, inverse: false };
    expect(() => engine.transformAxis({ ...base, inner: 2 })).toThrow("source holds 16 floats; needs 32");
    expect(() => engine.transformAxis({ ...base, length: 7, inputLength: 8 })).toThrow(
      "exceeds the transform's length 7",
    );
    expect(() => engine.transformAxis({ ...base, outputLength: 9 })).toThrow(
      "exceeds the transform's length 8",
    );
    expect(() => engine.transformAxis({ ...base, length: 8.5 })).toThrow("must be a whole number");
    expect(() =>
      engine.transformAxis({ ...base, length: 16, inputLength: 8, outputLength: 8 }),
    ).not.toThrow();
    const half = { target: new Float32Array(8), outputLength: 4 };
    expect(() => engine.transformAxis({ ...base, ...half })).not.toThrow();
  });
});
