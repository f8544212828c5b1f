import { expect, test } from "vitest";
import { besselJ1OverX } from "../../src/simulate/bessel-j1.js";

// computed with SciPy 1.10.1, scipy.special.j1; on both sides of each change of method (2 and 25)
test.each([
  [0.1, 0.049937526036242],
  [1, 0.44005058574493355],
  [1.9999, 0.5767312529177935],
  [2, 0.5767248077568734],
  [3.8317, 2.404559043086966e-6],
  [7.5, 0.13524842757970554],
  [12, -0.2234471044906276],
  [20, 0.0668331241758502],
  [24.999, -0.1254514698066945],
  [25, -0.1253502495802898],
  [25.001, -0.12524890825543739],
  [40, 0.126038318037585],
  [123.456, -0.010839584856520212],
  [1000, 0.00472831190708902],
  [12345.678, -0.007180894964739368],
])("J1(%s) is %s", (x, value) => {
  // The sine of a large x carries the rounding of x itself, x * 1e-16; below that, a few units of the last place.
  expect(Math.abs(x * besselJ1OverX(x) - value)).toBeLessThan(1e-15 + x * 2.3e-16);
});

test("J1(x) / x tends to 1/2", () => {
  expect(besselJ1OverX(0)).toBe(0.5);
  expect(besselJ1OverX(1e-4)).toBeCloseTo(0.5 * (1 - 1e-8 / 8), 15); // closed form: 1/2 (1 - x^2/8 + ...)
});
