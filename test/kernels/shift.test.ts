import { describe, expect, it } from "vitest";
import { shiftLines } from "../../src/kernels/shift.js";
import { naiveTransform, relativeL2, seededSamples } from "./reference-transform.js";

/** Centroid and magnitude of the image of one k-space line. */
function imageOf(line: Float32Array): { centroid: number; image: Float64Array } {
  const length = line.length / 2;
  const image = naiveTransform({ source: line, outer: 1, inner: 1, length, inverse: true });
  let [sum, moment] = [0, 0];
  for (let x = 0; x < length; x++) {
    const size = Math.hypot(image[2 * x]!, image[2 * x + 1]!);
    sum += size;
    moment += size * (x - Math.floor(length / 2));
  }
  return { centroid: moment / sum, image };
}

/** k-space of a Gaussian of deviation 6 px at x = 20 px with an offset in Hz; the oversampled sum of CHECKS S8, closed form. */
function gaussianLine(length: number, offsetHz: number, pixelBandwidthHz: number): Float32Array {
  const out = new Float32Array(2 * length);
  for (let j = 0; j < length; j++) {
    const k = j - Math.floor(length / 2);
    const tau = k / (length * pixelBandwidthHz);
    const size = Math.exp(-2 * (Math.PI * 6 * (k / length)) ** 2);
    const angle = -2 * Math.PI * ((k * 20) / length + offsetHz * tau);
    out[2 * j] = size * Math.cos(angle);
    out[2 * j + 1] = size * Math.sin(angle);
  }
  return out;
}

describe("shiftLines", () => {
  it.each([16, 15, 105])("undoes itself for %i samples", (length) => {
    const backing = seededSamples(2 * 3 * length + 2);
    const lines = backing.subarray(2); // non-zero byteOffset
    const there = shiftLines(lines, length, 3.37);
    // 1e-6: float32 rounding of two multiplications
    expect(relativeL2(shiftLines(there, length, -3.37), lines)).toBeLessThan(1e-6);
    expect(relativeL2(there, lines)).toBeGreaterThan(0.1);
  });

  it.each([12, 13])("moves whole pixels around the field of view of %i pixels", (length) => {
    const lines = seededSamples(2 * length);
    const { image } = imageOf(lines);
    const moved = imageOf(shiftLines(lines, length, 4)).image;
    const expected = Float64Array.from(image, (_, i) => image[(i - 8 + 2 * length) % (2 * length)]!);
    expect(relativeL2(moved, expected)).toBeLessThan(1e-6); // float32
  });

  it("puts fat at 3 T and 390.625 Hz per pixel back by 1.111782 px [computed with NumPy: S8]", () => {
    const seen = gaussianLine(256, 434.29, 390.625);
    expect(imageOf(seen).centroid).toBeCloseTo(20 + 1.111782, 5);
    expect(imageOf(shiftLines(seen, 256, -434.29 / 390.625)).centroid).toBeCloseTo(20, 5);
  });

  it("is demodulation by the offset with t = 0 at k = 0: .0272872 rad per 10 us sample at 3 T [computed with NumPy: S8]", () => {
    const ones = new Float32Array(512).map((_, i) => (i % 2 === 0 ? 1 : 0));
    const shifted = shiftLines(ones, 256, -434.29 / 390.625);
    expect(Math.atan2(shifted[2 * 129 + 1]!, shifted[2 * 129]!)).toBeCloseTo(0.0272872, 7);
    expect(shifted[2 * 128]).toBe(1); // k = 0 keeps its phase
  });

  it("turns round with the direction of reading", () => {
    const seen = gaussianLine(256, 434.29, -390.625); // read backward, already in the order of k
    expect(imageOf(seen).centroid).toBeCloseTo(20 - 1.111782, 5);
    expect(imageOf(shiftLines(seen, 256, 434.29 / 390.625)).centroid).toBeCloseTo(20, 5);
  });

  it("takes one shift for each line", () => {
    const lines = seededSamples(2 * 2 * 9);
    const each = shiftLines(lines, 9, [0.5, -1.25]);
    expect(each.subarray(0, 18)).toEqual(shiftLines(lines.subarray(0, 18), 9, 0.5));
    expect(each.subarray(18)).toEqual(shiftLines(lines.subarray(18), 9, -1.25));
  });

  it("refuses broken lines and missing shifts", () => {
    expect(() => shiftLines(new Float32Array(10), 4, 1)).toThrow(RangeError);
    expect(() => shiftLines(new Float32Array(16), 4, [1])).toThrow(RangeError);
  });
});
