import { describe, expect, test } from "vitest";
import { ringSensitivities, sensitivityAt } from "../../src/simulate/sensitivity.js";

const lengthMm = 240;
const positionsMm = Array.from({ length: 13 }, (_, i) => (i - 6) * 20);

/** The formula of the docstring, evaluated directly. */
function lobe(xMm: number, u: number): [number, number] {
  const phi = (Math.PI * xMm) / lengthMm;
  return [1 + 0.8 * u * Math.sin(phi), 0.4 * u * Math.cos(phi)];
}

describe.each([2, 3, 8])("%s coils", (coils) => {
  const s = ringSensitivities(coils, lengthMm);

  test("have a root sum of squares of 1 at the centre", () => {
    const squares = Array.from({ length: coils }, (_, c) => Object.values(sensitivityAt(s, c, 0, 0)));
    expect(squares.flat().reduce((sum, v) => sum + v * v, 0)).toBeCloseTo(1, 12);
  });

  test("have the shape of the closed form, up to a common factor", () => {
    const direct = (c: number, x: number, y: number): [number, number] => {
      const t = (2 * Math.PI * c) / coils + 0.3;
      const [a, b] = lobe(x, Math.cos(t));
      const [d, e] = lobe(y, Math.sin(t));
      const [re, im] = [a * d - b * e, a * e + b * d];
      return [re * Math.cos(t) - im * Math.sin(t), re * Math.sin(t) + im * Math.cos(t)];
    };
    const factor = sensitivityAt(s, 0, 0, 0).re / direct(0, 0, 0)[0];
    for (let c = 0; c < coils; c++)
      for (const x of positionsMm)
        for (const y of positionsMm) {
          const { re, im } = sensitivityAt(s, c, x, y);
          const [expectedRe, expectedIm] = direct(c, x, y);
          expect(re).toBeCloseTo(factor * expectedRe, 12); // two ways to round the same sums
          expect(im).toBeCloseTo(factor * expectedIm, 12);
        }
  });

  test("are brightest on their own side", () => {
    for (let c = 0; c < coils; c++) {
      const t = (2 * Math.PI * c) / coils + 0.3;
      const at = (sign: number) => {
        const { re, im } = sensitivityAt(s, c, sign * 100 * Math.cos(t), sign * 100 * Math.sin(t));
        return Math.hypot(re, im);
      };
      expect(at(1)).toBeGreaterThan(2 * at(-1));
    }
  });
});

test("a single coil is 1 everywhere", () => {
  const s = ringSensitivities(1, lengthMm);
  expect(sensitivityAt(s, 0, 33, -44)).toEqual({ re: 1, im: 0 });
});
