import { describe, expect, test } from "vitest";
import {
  aliasedPositionMm,
  bandwidthPerPixelHz,
  readoutBandwidthHz,
  readoutDurationSeconds,
  readoutGradientTPerM,
  smallestFieldOfViewM,
  t2StarBlurWidthPixels,
} from "../../src/physics/bandwidth.js";

describe("a readout of 256 samples, 10 us apart", () => {
  test("has 100 kHz, 2.56 ms, 390.625 Hz per pixel", () => {
    // closed form; 9 decimals leave room for the rounding of two operations
    expect(readoutBandwidthHz(10e-6)).toBeCloseTo(1e5, 9);
    expect(readoutDurationSeconds(256, 10e-6)).toBeCloseTo(2.56e-3, 15);
    expect(bandwidthPerPixelHz(256, 10e-6)).toBeCloseTo(390.625, 9);
  });

  test("has the same bandwidth per pixel with twofold oversampling", () => {
    expect(bandwidthPerPixelHz(512, 5e-6)).toBeCloseTo(390.625, 9);
  });

  test("needs 9.174451 mT/m over 256 mm", () => {
    // computed with NumPy, rounded to 7 digits
    expect(readoutGradientTPerM(readoutBandwidthHz(10e-6), 0.256) * 1e3).toBeCloseTo(9.174451, 6);
  });
});

test.each([
  [500e3, 293.582],
  [250e3, 146.791],
  [125e3, 73.396],
])("%s Hz and 40 mT/m reach down to %s mm", (bandwidthHz, mm) => {
  // computed with NumPy, rounded to 1 um: half a unit of the last digit
  expect(Math.abs(smallestFieldOfViewM(bandwidthHz, 0.04) * 1e3 - mm)).toBeLessThan(5.1e-4);
});

test.each([
  [140, -116],
  [-140, 116],
  [128, -128],
  [-128, -128],
  [300, 44],
  [-300, -44],
  [0, 0],
])("%s mm appears at %s mm in a field of view of 256 mm", (positionMm, seenMm) => {
  expect(aliasedPositionMm(positionMm, 256)).toBe(seenMm); // whole numbers: exact
});

describe("blur by decay during the readout", () => {
  // computed with NumPy: full width of |sinc(x + i b)| at half of its maximum, b = 0, 1/(2 pi), 1/pi; 4 decimals
  test.each([
    [0, 1.2067],
    [0.5 / Math.PI, 1.2537],
    [1 / Math.PI, 1.4053],
  ])("b = %s widens a point to %s pixels", (b, pixels) => {
    const pixelHz = 100;
    const t2StarSeconds = 1 / (2 * Math.PI * b * pixelHz); // Infinity without decay
    expect(t2StarBlurWidthPixels(t2StarSeconds, pixelHz)).toBeCloseTo(pixels, 4);
  });

  test("a quick decay gives a Lorentzian of width 2 sqrt(3) b", () => {
    const b = 10; // sin^2 is e^-62 beside sinh^2, so only x^2 + b^2 shapes the line
    expect(t2StarBlurWidthPixels(1 / (2 * Math.PI * b * 100), 100)).toBeCloseTo(2 * Math.sqrt(3) * b, 9);
  });
});
