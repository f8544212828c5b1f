import { expect, test } from "vitest";
import {
  fieldFromLarmorT,
  GYROMAGNETIC_RATIO_HZ_PER_T,
  larmorHz,
  SHIELDED_GYROMAGNETIC_RATIO_HZ_PER_T,
} from "../../src/physics/larmor.js";

test("the gyromagnetic ratio is that of CODATA 2022", () => {
  // published: NIST CODATA 2022 list, 42.577 478 461(18) MHz/T; exact copy, so no tolerance
  expect(GYROMAGNETIC_RATIO_HZ_PER_T).toBe(42577478.461);
  // published: CODATA 2022, 2.675 221 8708(11)e8 rad/s/T; half a unit of its last digit
  expect(Math.abs(2 * Math.PI * GYROMAGNETIC_RATIO_HZ_PER_T - 2.6752218708e8)).toBeLessThan(0.5);
});

test("water shields the proton by 25.67 ppm", () => {
  const shieldingPpm = (1 - SHIELDED_GYROMAGNETIC_RATIO_HZ_PER_T / GYROMAGNETIC_RATIO_HZ_PER_T) * 1e6;
  expect(shieldingPpm).toBeCloseTo(25.67, 2); // computed with NumPy from CODATA 2022; half a unit of the last digit
});

test.each([
  [1.5, 63.866218e6],
  [3, 127.732435e6],
  [7, 298.042349e6],
])("the resonance at %s T is %s Hz", (fieldT, hz) => {
  // computed with NumPy, rounded to 1 Hz: 1e-8 relative is more than half a unit at each field
  expect(Math.abs(larmorHz(fieldT) / hz - 1)).toBeLessThan(1e-8);
  expect(fieldFromLarmorT(larmorHz(fieldT))).toBeCloseTo(fieldT, 12); // rounding of one product and one quotient
});

test("a header's frequency implies its field", () => {
  // published: the standard's example header states 63 642 459 Hz beside 1.494 T; 1.494 745 T computed with NumPy
  expect(fieldFromLarmorT(63642459)).toBeCloseTo(1.494745, 6);
});
