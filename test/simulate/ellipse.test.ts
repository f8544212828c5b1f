import { describe, expect, test } from "vitest";
import { addEllipseSpectrum, type Ellipse, intensityAt, scaleEllipses } from "../../src/simulate/ellipse.js";

const disc: Ellipse = { x: 0, y: 0, a: 0.5, b: 0.5, degrees: 0, intensity: 1 };

function spectrumAt(ellipses: readonly Ellipse[], kx: number, ky: number): [number, number] {
  const result = new Float64Array(2);
  addEllipseSpectrum(ellipses, Float64Array.of(kx), ky, result);
  return [result[0] ?? Number.NaN, result[1] ?? Number.NaN];
}

describe("exact k-space", () => {
  // computed with SciPy from the closed form, 10 decimals: half a unit of the last digit, and a little
  const tolerance = 6e-11;

  test.each([
    [1, 0, 0.1423076716],
    [0, -1, 0.1423076716],
    [2, 0, -0.0530956325],
    [1.2196698913, 0, 0],
  ])("of a disc at (%s, %s) is %s", (kx, ky, value) => {
    const [re, im] = spectrumAt([disc], kx, ky);
    expect(Math.abs(re - value)).toBeLessThan(tolerance);
    expect(im).toBeCloseTo(0, 15); // a centred disc has no phase
  });

  test("of a shifted, turned ellipse", () => {
    const [re, im] = spectrumAt([{ x: 0.1, y: -0.05, a: 0.3, b: 0.2, degrees: 30, intensity: 1 }], 2, 1);
    expect(Math.abs(re + 0.0074888941)).toBeLessThan(tolerance);
    expect(Math.abs(im - 0.0103075785)).toBeLessThan(tolerance);
  });

  test("is the area times the intensity at k = 0", () => {
    expect(spectrumAt([{ ...disc, a: 0.3, b: 0.2, intensity: 5 }], 0, 0)[0]).toBeCloseTo(
      5 * Math.PI * 0.06,
      14,
    );
  });

  test("adds to what is there, times the scale", () => {
    const result = Float64Array.of(7, 8, 9, 10);
    addEllipseSpectrum([disc], Float64Array.of(1, 2), 0, result, 10);
    const expected = [8.423076716, 8, 8.469043675, 10];
    for (const [i, value] of expected.entries()) expect(result[i]).toBeCloseTo(value, 8); // 10 times the 10th decimal
  });

  test("follows the similarity theorem: lengths times s give s^2 F(s k)", () => {
    const e: Ellipse = { x: 0.1, y: -0.05, a: 0.3, b: 0.2, degrees: 30, intensity: 1 };
    const [re, im] = spectrumAt(scaleEllipses([e], 4), 0.5, 0.25);
    expect(re).toBeCloseTo(16 * spectrumAt([e], 2, 1)[0], 13);
    expect(im).toBeCloseTo(16 * spectrumAt([e], 2, 1)[1], 13);
  });
});

test("the intensity of a point is the sum of the ellipses around it, rims included", () => {
  const tilted: Ellipse = { x: 1, y: 1, a: 2, b: 0.1, degrees: 45, intensity: 3 };
  expect(intensityAt([disc, tilted], 0, 0)).toBe(4); // the long axis runs along the diagonal through 0
  expect(intensityAt([disc, tilted], 2, 0)).toBe(0);
  expect(intensityAt([disc, tilted], 2, 2)).toBe(3);
  expect(intensityAt([disc], 0.5, 0)).toBe(1);
});
