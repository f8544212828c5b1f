import { describe, expect, test } from "vitest";
import { bandwidthPerPixelHz } from "../../src/physics/bandwidth.js";
import {
  chemicalShiftHz,
  FAT_MAIN_PEAK_PPM,
  FAT_SPECTRUM,
  inPhaseEchoSeconds,
  opposedPhaseEchoSeconds,
  shiftPixels,
  spectrumSignal,
} from "../../src/physics/chemical-shift.js";
import { larmorHz } from "../../src/physics/larmor.js";

const rows = [
  // computed with NumPy: field, offset at 3.4 and 3.5 ppm (Hz), opposed and in-phase echo (us), thousandths of a pixel
  {
    t: 1.5,
    hz34: 217.145,
    hz35: 223.532,
    opUs: 2302.6,
    ipUs: 4605.2,
    px: [2171.5, 1085.7, 555.9, 434.3, 217.1],
  },
  {
    t: 3,
    hz34: 434.29,
    hz35: 447.064,
    opUs: 1151.3,
    ipUs: 2302.6,
    px: [4342.9, 2171.5, 1111.8, 868.6, 434.3],
  },
  {
    t: 7,
    hz34: 1013.344,
    hz35: 1043.148,
    opUs: 493.4,
    ipUs: 986.8,
    px: [10133.4, 5066.7, 2594.2, 2026.7, 1013.3],
  },
];
const pixelBandwidths = [100, 200, 390.625, 500, 1000];

describe.each(rows)("fat at $t T", ({ t, hz34, hz35, opUs, ipUs, px }) => {
  const offsetHz = chemicalShiftHz(FAT_MAIN_PEAK_PPM, larmorHz(t));

  test("lies below water", () => {
    // rounded to 3 decimals: half a unit of the last digit
    expect(offsetHz).toBeCloseTo(-hz34, 3);
    expect(chemicalShiftHz(-3.5, larmorHz(t))).toBeCloseTo(-hz35, 3);
  });

  test("is opposed and in phase at the published times", () => {
    expect(opposedPhaseEchoSeconds(offsetHz) * 1e6).toBeCloseTo(opUs, 1);
    expect(inPhaseEchoSeconds(offsetHz) * 1e6).toBeCloseTo(ipUs, 1);
    expect(opposedPhaseEchoSeconds(offsetHz, 2) / opposedPhaseEchoSeconds(offsetHz)).toBeCloseTo(3, 12);
    expect(inPhaseEchoSeconds(offsetHz, 3) / inPhaseEchoSeconds(offsetHz)).toBeCloseTo(3, 12);
  });

  test("shifts to smaller x on a forward readout", () => {
    // half a unit of the last digit, and a little for binary fractions
    for (const [i, pixelHz] of pixelBandwidths.entries())
      expect(Math.abs(1e3 * shiftPixels(offsetHz, pixelHz) + (px[i] ?? Number.NaN))).toBeLessThan(0.051);
  });
});

test("forward and reversed echoes lie 2.2236 pixels apart at 3 T and 390.625 Hz per pixel", () => {
  const shift = shiftPixels(chemicalShiftHz(-3.4, larmorHz(3)), bandwidthPerPixelHz(256, 10e-6));
  // computed with NumPy: twice 1.1118, itself rounded to 4 decimals, so a unit of the last digit
  expect(Math.abs(Math.abs(shift - -shift) - 2.2236)).toBeLessThan(1e-4);
});

describe("the six-peak spectrum of fat", () => {
  const magnitude = (fieldT: number, seconds: number) =>
    Math.hypot(...spectrumSignal(FAT_SPECTRUM, larmorHz(fieldT), seconds));

  test("has shares that add up to 1, most of it in the main peak", () => {
    expect(FAT_SPECTRUM.reduce((sum, peak) => sum + peak.share, 0)).toBeCloseTo(1, 12);
    const main = FAT_SPECTRUM.find((peak) => Math.abs(peak.ppm - FAT_MAIN_PEAK_PPM) < 1e-9);
    expect(main?.share).toBe(0.7); // from memory: Hamilton 2011, grouped table
  });

  test("agrees with the ratios of the paper's abstract", () => {
    // published: Hamilton 2011 abstract; slopes to 3 decimals against shares rounded to 0.1 %
    const share = (ppm: number) =>
      FAT_SPECTRUM.find((peak) => Math.abs(peak.ppm + 4.7 - ppm) < 1e-9)?.share ?? Number.NaN;
    expect(share(2.1) / share(1.3)).toBeCloseTo(0.172, 2);
    expect(share(0.9) / share(1.3)).toBeCloseTo(0.125, 2);
    expect(share(2.75)).toBeCloseTo(0.006, 12);
    expect(share(5.3) + share(4.2)).toBeCloseTo(0.086, 12);
  });

  test.each([
    [1.15e-3, 0.79871],
    [2.3e-3, 0.81892],
    [4.6e-3, 0.55947],
  ])("at 3 T and %s s has the magnitude %s", (seconds, value) => {
    expect(magnitude(3, seconds)).toBeCloseTo(value, 5); // computed with NumPy, 5 decimals
  });

  test("is most opposed at 1.167 ms at 3 T", () => {
    // computed with NumPy on a grid of 0.1 us: minimum of the real part -0.79802 at 1.167 ms
    const times = Array.from({ length: 2001 }, (_, i) => i * 1e-6);
    const reals = times.map((seconds) => spectrumSignal(FAT_SPECTRUM, larmorHz(3), seconds)[0]);
    const lowest = Math.min(...reals);
    expect(lowest).toBeCloseTo(-0.79802, 5);
    expect(times[reals.indexOf(lowest)]).toBeCloseTo(1.167e-3, 6);
  });

  test("turns forward for a peak below water: exp(-i 2 pi df t) with df < 0", () => {
    const [re, im] = spectrumSignal([{ ppm: -1, share: 1 }], 1e6, 0.25); // df = -1 Hz: a quarter turn
    expect(re).toBeCloseTo(0, 12);
    expect(im).toBeCloseTo(1, 12);
  });
});
