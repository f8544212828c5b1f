import { describe, expect, test } from "vitest";
import { RandomStream } from "../../src/kernels/random.js";

describe("xoshiro128**", () => {
  test("gives the numbers of its authors' C program", () => {
    // computed with the authors' published C code, compiled with gcc, from the state {1, 2, 3, 4}
    const stream = new RandomStream([1, 2, 3, 4]);
    const first = [
      11520, 0, 5927040, 70819200, 2031721883, 1637235492, 1287239034, 3734860849, 3729100597, 4258142804,
    ];
    expect(first.map(() => stream.nextUint32())).toEqual(first);
    for (let i = 0; i < 990; i++) stream.nextUint32();
    expect(stream.nextUint32()).toBe(136054147);
  });

  test("differs from seed to seed", () => {
    const heads = [0, 1, 2, 2 ** 31, 2 ** 32 - 1].map((seed) => RandomStream.fromSeed(seed).nextUint32());
    expect(new Set(heads).size).toBe(heads.length);
  });
});

test("Gaussian numbers have the moments of a standard normal distribution", () => {
  const n = 200000;
  const values = new Float64Array(n);
  RandomStream.fromSeed(5).fillGaussian(values);
  const mean = (f: (v: number, i: number) => number) => values.reduce((sum, v, i) => sum + f(v, i), 0) / n;
  // four standard errors each: variances of v, v^2, v^3, v^4 are 1, 2, 15, 96; of a product of two, 1
  expect(Math.abs(mean((v) => v))).toBeLessThan(4 / Math.sqrt(n));
  expect(Math.abs(mean((v) => v ** 2) - 1)).toBeLessThan(4 * Math.sqrt(2 / n));
  expect(Math.abs(mean((v) => v ** 3))).toBeLessThan(4 * Math.sqrt(15 / n));
  expect(Math.abs(mean((v) => v ** 4) - 3)).toBeLessThan(4 * Math.sqrt(96 / n));
  for (const lag of [1, 2, 3])
    expect(Math.abs(mean((v, i) => v * (values[(i + lag) % n] ?? Number.NaN)))).toBeLessThan(
      4 / Math.sqrt(n),
    );
});
