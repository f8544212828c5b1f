import { describe, expect, test } from "vitest";
import { concomitantOffsetHz } from "../../src/physics/concomitant-field.js";

const GAMMA_HZ_PER_T = 42.577478461e6; // CODATA 2022

describe("the offset is what the length of the whole field adds to its part along the main field", () => {
  // Maxwell: div B = 0 and curl B = 0 tie a gradient of Bz to Bx = Gx z - Gz x / 2, By = Gy z - Gz y / 2 for symmetric coils.
  test.each([
    [[0.01, 0, 0], [0.03, -0.05, 0.1], 1.5],
    [[0, 0.012, 0], [0.03, -0.05, 0.1], 3],
    [[0, 0, 0.02], [0.06, 0.08, -0.03], 1.5],
    [[0.01, -0.007, 0.02], [0.05, 0.02, -0.06], 3],
  ] as const)("gradient %j at %j in %f T", (gradient, position, fieldT) => {
    const [gx, gy, gz] = gradient;
    const [x, y, z] = position;
    const along = fieldT + gx * x + gy * y + gz * z;
    const length = Math.hypot(gx * z - (gz * x) / 2, gy * z - (gz * y) / 2, along);
    const exactHz = GAMMA_HZ_PER_T * (length - along);
    // Lowest order in G r / B0, here up to 2e-3; the difference of doubles keeps 9 digits.
    expect(Math.abs(concomitantOffsetHz(gradient, position, fieldT) / exactHz - 1)).toBeLessThan(3e-3);
  });
});

test("worked by hand: 10 mT/m across the field, 0.1 m along it, 1.5 T; a quarter the other way round", () => {
  expect(concomitantOffsetHz([0.01, 0, 0], [0, 0, 0.1], 1.5)).toBeCloseTo(42.577478461 / 3, 6);
  expect(concomitantOffsetHz([0, 0, 0.01], [0.06, 0.08, 0], 1.5)).toBeCloseTo(42.577478461 / 12, 6);
});
