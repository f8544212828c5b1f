import { describe, expect, it } from "vitest";
import { imageNoiseDeviation, signalMask } from "../../src/kernels/signal-mask.js";
import { seededNormal } from "./seeded-normal.js";

const normal = seededNormal(8);
const [ROWS, COLUMNS] = [61, 70];
const bright = (i: number) => Math.floor(i / 2) % COLUMNS > 20 && Math.floor(i / 2 / COLUMNS) > 15;
const image = Float32Array.from(
  { length: 2 * ROWS * COLUMNS },
  (_, i) => (bright(i) ? 100 : 0) + 2 * normal(),
);

describe("signalMask", () => {
  it("keeps what is above a share of the bright level and above the noise", () => {
    const mask = signalMask([image, image], 0.2, 2);
    for (let p = 0; p < mask.length; p++) expect(mask[p]).toBe(bright(2 * p) ? 1 : 0);
    expect(signalMask([image], 0.001).reduce((n, flag) => n + flag, 0)).toBeGreaterThan(mask.length * 0.99);
    expect(signalMask([image], 0.001, 2).reduce((n, flag) => n + flag, 0)).toBe(
      mask.reduce((n, flag) => n + flag, 0),
    );
  });
});

describe("imageNoiseDeviation", () => {
  it("finds the noise of a part beside bright signal", () => {
    // medians of about 70 differences, correlated: 12 % each, the lowest of 49 two of them down; stated as within 10 % for larger images
    expect(Math.abs(imageNoiseDeviation(image, ROWS, COLUMNS) / 2 - 1)).toBeLessThan(0.25);
    const large = Float32Array.from({ length: 2 * 256 * 256 }, () => 3 * normal());
    expect(Math.abs(imageNoiseDeviation(large, 256, 256) / 3 - 1)).toBeLessThan(0.1);
  });
});
