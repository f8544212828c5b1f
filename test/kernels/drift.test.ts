import { describe, expect, it } from "vitest";
import { driftBetween } from "../../src/kernels/drift.js";
import { demodulateLines } from "../../src/kernels/shift.js";
import { seededNormal } from "./seeded-normal.js";

const [CHANNELS, SAMPLES, DWELL_SECONDS] = [3, 128, 10e-6];
const normal = seededNormal(4);
const first = Float32Array.from({ length: 2 * CHANNELS * SAMPLES }, () => normal());

/** The readout with a frequency and a phase added, in the sense exp(-i 2 pi f t). */
function drifted(hz: number, radians: number, noise = 0): Float32Array {
  return first.map((_, i) => {
    const at = i & ~1;
    const seconds = ((at / 2) % SAMPLES) * DWELL_SECONDS;
    const angle = -2 * Math.PI * hz * seconds + radians;
    const [c, s] = [Math.cos(angle), Math.sin(angle)];
    const value = i % 2 ? first[at]! * s + first[at + 1]! * c : first[at]! * c - first[at + 1]! * s;
    return value + noise * normal();
  });
}

describe("driftBetween", () => {
  // up to near the limit of neighbouring samples, 1 / (2 dwell) = 50 kHz
  it.each([0, 0.3, -41, 780, -20e3, 49e3])("finds %f Hz, whatever the phase", (hz) => {
    for (const radians of [0, 2.5, -3.1])
      expect(driftBetween(first, drifted(hz, radians), CHANNELS, DWELL_SECONDS)).toBeCloseTo(hz, 1); // float32
  });

  it("errs in noise as a straight line through phases does", () => {
    // Deviation of the phase of each sample: about noise / signal; slope of N of them over N dwell: sqrt(12 / N) / N.
    const noise = 0.02;
    const errors = Array.from(
      { length: 60 },
      () => driftBetween(first, drifted(25, 1, noise), CHANNELS, DWELL_SECONDS) - 25,
    );
    const found = Math.sqrt(errors.reduce((sum, error) => sum + error * error, 0) / errors.length);
    const signal = Math.sqrt(2 * CHANNELS);
    const expected = (noise / signal) * (Math.sqrt(12 / SAMPLES) / (SAMPLES * 2 * Math.PI * DWELL_SECONDS));
    expect(found / expected).toBeGreaterThan(0.6);
    expect(found / expected).toBeLessThan(1.6); // 60 of them, of samples that are not equally strong
  });

  it("refuses readouts of different lengths", () => {
    expect(() => driftBetween(first, first.subarray(2), CHANNELS, DWELL_SECONDS)).toThrow(RangeError);
  });
});

describe("demodulateLines", () => {
  it("takes off what a frequency has done since the excitation, forward and backward", () => {
    const [length, coils] = [16, 2];
    const hz = [120, -35];
    const echo = [0.004, 0.006];
    const step = [1e-5, -1e-5];
    const lines = new Float32Array(2 * 2 * coils * length);
    for (let line = 0, i = 0; line < 2; line++)
      for (let coil = 0; coil < coils; coil++)
        for (let j = 0; j < length; j++, i += 2) {
          const angle = -2 * Math.PI * hz[line]! * (echo[line]! + (j - 8) * step[line]!);
          lines.set([(1 + coil) * Math.cos(angle), (1 + coil) * Math.sin(angle)], i);
        }
    demodulateLines(lines, length, coils, hz, echo, step);
    lines.forEach((value, i) => {
      const coil = Math.floor(i / (2 * length)) % coils;
      expect(value).toBeCloseTo(i % 2 ? 0 : 1 + coil, 6);
    });
  });
});
