import { describe, expect, it } from "vitest";
import { createKernels } from "../../src/kernels/create-kernels.js";
import { createPlainKernels } from "../../src/kernels/plain-kernels.js";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { createSimdKernels } from "../../src/kernels/simd-kernels.js";
import { simdSupported } from "../../src/kernels/simd-module.js";
import { createSimdPlace } from "../../src/kernels/simd-place.js";
import { relativeL2, seededSamples } from "./reference-transform.js";

const plain = createPlainKernels();
const simd = createSimdKernels();

/** A copy in the shared memory, 3 floats into a block. */
function inside(values: Float32Array): Float32Array {
  const view = simd.transform.allocate(values.length + 3).subarray(3);
  view.set(values);
  return view;
}

/** Both kernels, each with arrays that it likes; the results must be the same bits. */
const WAYS = [
  { name: "plain", kernels: plain, place: (x: Float32Array) => x.slice() },
  { name: "simd", kernels: simd, place: inside },
  { name: "simd, arrays elsewhere", kernels: simd, place: (x: Float32Array) => x.slice() },
];

it("is supported by this JavaScript engine, and then chosen", async () => {
  expect(simdSupported()).toBe(true);
  expect((await createKernels()).id).toBe("simd");
});

describe.each([
  { lines: 3, inChannels: 4, outChannels: 4, samples: 21 },
  { lines: 2, inChannels: 5, outChannels: 3, samples: 8 },
  { lines: 1, inChannels: 1, outChannels: 2, samples: 3 },
  { lines: 2, inChannels: 3, outChannels: 1, samples: 40 },
])("mixChannels %o", ({ lines, inChannels, outChannels, samples }) => {
  const source = seededSamples(2 * lines * inChannels * samples, 1);
  const matrix = seededSamples(2 * outChannels * inChannels, 2);
  // Lower triangular, so that rows have zeros to skip.
  for (let o = 0; o < outChannels; o++)
    matrix.fill(0, 2 * (o * inChannels + o + 1), 2 * (o + 1) * inChannels);
  const result = (way: (typeof WAYS)[number]) => {
    const target = way.place(new Float32Array(2 * lines * outChannels * samples).fill(9));
    way.kernels.mixChannels(way.place(source), target, matrix, lines, inChannels, outChannels, samples);
    return target.slice();
  };

  it("is the matrix product", () => {
    const expected: number[] = [];
    for (let line = 0; line < lines; line++) {
      for (let o = 0; o < outChannels; o++) {
        for (let s = 0; s < samples; s++) {
          let [re, im] = [0, 0];
          for (let c = 0; c < inChannels; c++) {
            const [mRe, mIm] = matrix.subarray(2 * (o * inChannels + c));
            const [xRe, xIm] = source.subarray(2 * ((line * inChannels + c) * samples + s));
            re += mRe! * xRe! - mIm! * xIm!;
            im += mRe! * xIm! + mIm! * xRe!;
          }
          expected.push(re, im);
        }
      }
    }
    // At most ten float32 products a sum: ten roundings of 6e-8.
    expect(relativeL2(result(WAYS[0]!), expected)).toBeLessThan(6e-7);
  });

  it("gives the same bits every way", () => {
    const [first, ...others] = WAYS.map(result);
    for (const other of others) expect(other).toEqual(first);
  });
});

it("mixChannels works in place", () => {
  const source = seededSamples(2 * 3 * 4 * 21, 1);
  const matrix = seededSamples(2 * 4 * 4, 2);
  const expected = source.slice();
  plain.mixChannels(source, expected, matrix, 3, 4, 4, 21);
  for (const { kernels, place } of WAYS) {
    const data = place(source);
    kernels.mixChannels(data, data, matrix, 3, 4, 4, 21);
    expect(data.slice()).toEqual(expected);
  }
});

it("mixChannels does not multiply zeros at the ends of a row: a NaN beyond the triangle stays out", () => {
  const matrix = Float32Array.from([2, 0, 0, 0, 0, 0, 0, 1]); // [[2, 0], [0, i]]
  const source = Float32Array.from([1, 1, Number.NaN, Number.NaN]);
  for (const way of WAYS) {
    const target = way.place(new Float32Array(4));
    way.kernels.mixChannels(way.place(source), target, matrix, 1, 2, 2, 1);
    expect([...target]).toEqual([2, 2, Number.NaN, Number.NaN]);
  }
});

describe.each([
  { outer: 3, length: 4, inner: 5 },
  { outer: 2, length: 9, inner: 1 },
  { outer: 1, length: 2, inner: 8 },
  { outer: 2, length: 2500, inner: 1 }, // more than one piece of the window
  { outer: 2, length: 2500, inner: 3 },
])("multiplyAxis %o", ({ outer, length, inner }) => {
  const source = seededSamples(2 * outer * length * inner, 4);
  const window = seededSamples(length, 5);
  const expected = source.map((value, f) => value * window[Math.floor(f / 2 / inner) % length]!);

  it.each(WAYS)("is one rounded product a float, in place and not: $name", ({ kernels, place }) => {
    const [data, target] = [place(source), place(source)];
    kernels.multiplyAxis(data, target, window, inner);
    expect(target.slice()).toEqual(expected);
    kernels.multiplyAxis(data, data, window, inner);
    expect(data.slice()).toEqual(expected);
  });
});

it("multiplyGrid repeats the grid over the outer axes", () => {
  const source = seededSamples(2 * 3 * 20);
  const grid = seededSamples(20, 2);
  const expected = source.map((value, f) => value * grid[(f >> 1) % 20]!);
  for (const { kernels, place } of WAYS) {
    const data = place(source);
    kernels.multiplyGrid(data, data, grid);
    expect(data.slice()).toEqual(expected);
  }
});

describe.each([
  { outer: 2, channels: 3, inner: 11 },
  { outer: 1, channels: 8, inner: 4 },
  { outer: 3, channels: 1, inner: 3 },
])("rootSumOfSquares %o", ({ outer, channels, inner }) => {
  it("is the float64 root, rounded once, the same bits every way", () => {
    const source = seededSamples(2 * outer * channels * inner, 6);
    const expected = Float32Array.from({ length: outer * inner }, (_, at) => {
      let sum = 0;
      for (let c = 0; c < channels; c++) {
        const from = 2 * ((Math.floor(at / inner) * channels + c) * inner + (at % inner));
        sum += source[from]! ** 2 + source[from + 1]! ** 2;
      }
      return Math.sqrt(sum);
    });
    for (const { kernels, place } of WAYS) {
      const target = place(new Float32Array(outer * inner));
      kernels.rootSumOfSquares(place(source), target, outer, channels, inner);
      expect(target.slice()).toEqual(expected);
    }
  });
});

it("magnitude: 3-4-5, and numbers whose squares float32 cannot hold", () => {
  const source = Float32Array.from([3, 4, 0, -2, 3e30, 4e30, 3e-30, -4e-30, 5, 12]);
  for (const { kernels, place } of WAYS) {
    const target = place(new Float32Array(5));
    kernels.magnitude(place(source), target);
    expect([...target]).toEqual([5, 2, Math.fround(5e30), Math.fround(5e-30), 13]);
  }
});

it("add and scale: one rounding a float", () => {
  const [a, b] = [seededSamples(23, 1), seededSamples(23, 2)];
  for (const { kernels, place } of WAYS) {
    const data = place(a);
    kernels.add(data, place(b));
    expect(data.slice()).toEqual(a.map((value, i) => value + b[i]!));
    const scaled = place(a);
    kernels.scale(scaled, 1 / 3);
    expect(scaled.slice()).toEqual(a.map((value) => value * Math.fround(1 / 3)));
  }
});

describe.each([1, 7, 2501])("addEnergy, %i samples a row", (samples) => {
  const source = seededSamples(2 * 5 * samples, 8);

  it("adds the rows' squares in float64, the same bits every way", () => {
    const expected = Float64Array.from({ length: samples }, (_, s) => {
      let sum = 0.25;
      for (let row = 0; row < 5; row++) {
        const from = 2 * (row * samples + s);
        sum += source[from]! * source[from]! + source[from + 1]! * source[from + 1]!;
      }
      return sum;
    });
    for (const { kernels, place } of WAYS) {
      const profile = new Float64Array(samples).fill(0.25);
      expect(kernels.addEnergy(place(source), profile)).toBe(true);
      expect(profile).toEqual(expected);
    }
  });

  it("tells a sample that is not finite, wherever it is", () => {
    for (const bad of [Number.NaN, Number.POSITIVE_INFINITY]) {
      for (const at of [0, 2 * samples + 1, source.length - 1]) {
        const spoilt = source.slice();
        spoilt[at] = bad;
        for (const { kernels, place } of WAYS) {
          expect(kernels.addEnergy(place(spoilt), new Float64Array(samples))).toBe(false);
        }
      }
    }
  });
});

it("swapWords reverses bytes", () => {
  const bytes = Uint8Array.from({ length: 36 }, (_, i) => i);
  const reversed = Array.from(bytes, (_, i) => (i & ~3) + 3 - (i & 3));
  const block = simd.transform.allocate(9);
  const inShared = new Uint32Array(block.buffer, block.byteOffset, 9);
  inShared.set(new Uint32Array(bytes.buffer));
  for (const [kernels, words] of [
    [plain, new Uint32Array(bytes.slice().buffer)],
    [simd, new Uint32Array(bytes.slice().buffer)],
    [simd, inShared],
  ] as const) {
    kernels.swapWords(words);
    expect([...new Uint8Array(words.buffer, words.byteOffset, 36)]).toEqual(reversed);
  }
});

it.each(WAYS)("refuses arrays of other lengths: $name", ({ kernels, place }) => {
  const [six, eight] = [place(new Float32Array(6)), place(new Float32Array(8))];
  expect(() => kernels.mixChannels(six, six, new Float32Array(2), 1, 1, 1, 4)).toThrow(
    "source holds 6 values; needs 8",
  );
  expect(() => kernels.multiplyAxis(six, eight, new Float32Array(3), 1)).toThrow(
    "target holds 8 values; needs 6",
  );
  expect(() => kernels.multiplyGrid(six, six, new Float32Array(2))).toThrow("needs a multiple of 4");
  expect(() => kernels.rootSumOfSquares(eight, six, 1, 2, 2)).toThrow("target holds 6 values; needs 2");
  expect(() => kernels.magnitude(eight, six)).toThrow("source holds 8 values; needs 12");
  expect(() => kernels.add(six, eight)).toThrow("source holds 8 values; needs 6");
  expect(() => kernels.addEnergy(six, new Float64Array(2))).toThrow("needs a multiple of 4");
});

it("mixes within a posted region that was sized for it, without forgetting plans", () => {
  const samples = new SampleMemory();
  const kernels = createSimdKernels(createSimdPlace(samples, { lengths: [48], channels: 16 }, 1 << 16));
  let forgotten = 0;
  kernels.transform.instance.region.onEmptied(() => forgotten++);
  const data = kernels.transform.allocate(2 * 16 * 48);
  data.set(seededSamples(data.length));
  const matrix = seededSamples(2 * 16 * 16);
  const expected = data.slice();
  plain.mixChannels(expected, expected, matrix, 1, 16, 16, 48);
  kernels.transform.transformAxis({
    source: data,
    target: data,
    outer: 16,
    inner: 1,
    length: 48,
    inverse: true,
  });
  data.set(seededSamples(data.length));
  kernels.mixChannels(data, data, matrix, 1, 16, 16, 48);
  expect(data.slice()).toEqual(expected);
  expect(forgotten).toBe(0);
});
