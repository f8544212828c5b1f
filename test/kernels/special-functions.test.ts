import { describe, expect, it } from "vitest";
import { besselI0, sinc } from "../../src/kernels/special-functions.js";

describe("besselI0", () => {
  // computed with SciPy 1.17 (scipy.special.i0), which states a relative error of about 5e-16
  it.each([
    [0, 1],
    [0.5, 1.0634833707413236],
    [1, 1.2660658777520082],
    [6, 67.23440697647798],
    [10, 2815.716628466254],
    [50, 2.9325537838493355e20],
    [700, 1.5295933476718737e302],
  ])("I0(%d)", (x, value) => {
    // A sum of up to 400 positive terms rounds by a few units of 1e-16 each way.
    expect(Math.abs(besselI0(x) / value - 1)).toBeLessThan(1e-14);
    expect(besselI0(-x)).toBe(besselI0(x));
  });
});

describe("sinc", () => {
  it("is 1 at 0, and 2/pi at 1/2", () => {
    expect(sinc(0)).toBe(1);
    expect(sinc(0.5)).toBeCloseTo(2 / Math.PI, 15);
    expect(sinc(-1.5)).toBeCloseTo(-2 / (3 * Math.PI), 15);
    expect(Math.abs(sinc(3))).toBeLessThan(1e-15);
  });
});
