import { describe, expect, test } from "vitest";
import { UsageError } from "../../src/errors.js";
import {
  absoluteRange,
  automaticRange,
  percentile,
  toGrey8,
  toGrey16,
} from "../../src/writers/grey-range.js";

test("percentiles are those of numpy.percentile", () => {
  // computed with NumPy: percentile([1, 2, 4, 8, 16], [0, 10, 50, 99.5, 100]); 1e-12 is rounding
  const values = [1, 2, 4, 8, 16];
  const found = [0, 10, 50, 99.5, 100].map((percent) => percentile(values, percent));
  [1, 1.4, 4, 15.84, 16].forEach((expected, i) => {
    expect(found[i]).toBeCloseTo(expected, 12);
  });
});

describe("magnitude", () => {
  /** Background 1, a share of tissue at 100 to 200, evenly spread. */
  const image = (count: number, tissue: number) =>
    Float32Array.from({ length: count }, (_, i) => (i < tissue ? 100 + (100 * i) / (tissue - 1) : 1));

  test("starts at 0 and ends near the top of the tissue, be the object large or small", () => {
    for (const tissue of [9000, 1000, 100]) {
      const { low, high } = automaticRange("magnitude", image(10000, tissue));
      expect(low).toBe(0);
      // the 99.5th percentile of values spread evenly from 100 to 200; 0.01 for float32
      expect(Math.abs(high - 199.5)).toBeLessThan(0.01);
    }
  });

  test("is not darkened by a few spikes", () => {
    const spiky = image(10000, 5000);
    spiky[7000] = 1e6;
    spiky[7001] = Number.POSITIVE_INFINITY;
    spiky[7002] = Number.NaN;
    expect(automaticRange("magnitude", spiky).high).toBeLessThan(200);
  });

  test("a single bright pixel on nothing is white, and an empty picture black", () => {
    expect(
      automaticRange(
        "magnitude",
        Float32Array.from({ length: 10000 }, (_, i) => (i === 7 ? 5 : 0)),
      ).high,
    ).toBe(5);
    const empty = automaticRange("magnitude", new Float32Array(9));
    expect([...toGrey8(new Float32Array(9), empty)]).toEqual(Array(9).fill(0));
    expect(automaticRange("magnitude", Float32Array.of(Number.NaN)).high).toBe(1);
  });

  test("the values are not changed", () => {
    const values = Float32Array.of(3, 1, 2);
    automaticRange("magnitude", values);
    expect(values).toEqual(Float32Array.of(3, 1, 2));
  });
});

test("phase is shown from -pi to pi whatever the values, and signed values about 0", () => {
  expect(automaticRange("phase", [0.1, 0.2])).toMatchObject({ low: -Math.PI, high: Math.PI });
  expect(automaticRange("signed", [-8, 8, -8, 8])).toMatchObject({ low: -8, high: 8 });
});

test("levels: ends, clipping, rounding and no number", () => {
  const range = absoluteRange(-1, 1);
  const values = [
    -1,
    1,
    0,
    -5,
    5,
    Number.NaN,
    Number.POSITIVE_INFINITY,
    2 * (100.4 / 255) - 1,
    2 * (100.6 / 255) - 1,
  ];
  expect([...toGrey8(values, range)]).toEqual([0, 255, 128, 0, 255, 0, 255, 100, 101]);
  expect([...toGrey16(values.slice(0, 7), range)]).toEqual([0, 65535, 32768, 0, 65535, 0, 65535]);
});

test("quantising loses what rounding to the nearest level must, and no more", () => {
  // PNG quantisation ceiling 8 / 16 bit: 58.923 / 107.121 dB, tolerance 0.05 dB (computed with NumPy/SciPy)
  const values = Float64Array.from({ length: 2 ** 18 }, (_, i) => (i + 0.5) / 2 ** 18);
  const psnr = (levels: ArrayLike<number>, top: number) => {
    const squares = values.reduce((sum, value, i) => sum + (value - (levels[i] ?? 0) / top) ** 2, 0);
    return -10 * Math.log10(squares / values.length);
  };
  const range = absoluteRange(0, 1);
  expect(Math.abs(psnr(toGrey8(values, range), 255) - 58.923)).toBeLessThan(0.05);
  expect(Math.abs(psnr(toGrey16(values, range), 65535) - 107.121)).toBeLessThan(0.05);
});

test.each([
  [1, 1],
  [2, 1],
  [Number.NaN, 1],
])("a range from %d to %d is refused", (low, high) => {
  expect(() => absoluteRange(low, high)).toThrow(UsageError);
});
