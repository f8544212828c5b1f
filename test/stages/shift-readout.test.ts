import { readFileSync } from "node:fs";
import { describe, expect, test } from "vitest";
import { shiftReadout } from "../../src/stages/shift-readout.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";

/** Three vials, the middle one of oil; true places and the oil's displaced one stand in the JSON (made with NumPy). */
const RAW = "data/conformance/projection.h5";
const FACTS = JSON.parse(readFileSync("data/conformance/projection.json", "utf8"));

/** Mean magnitude of 8 profiles of 256 pixels at a fractional pixel: band-limited interpolation, even N. */
function valueAt(profiles: Float32Array, x: number): number {
  const kernel = Float64Array.from({ length: 256 }, (_, j) => {
    const d = x - j;
    return d === 0 ? 1 : Math.sin(Math.PI * d) / (256 * Math.tan((Math.PI * d) / 256));
  });
  let sum = 0;
  for (let r = 0; r < 8; r++) {
    let re = 0;
    let im = 0;
    for (let j = 0; j < 256; j++) {
      re += kernel[j]! * profiles[2 * (256 * r + j)]!;
      im += kernel[j]! * profiles[2 * (256 * r + j) + 1]!;
    }
    sum += Math.hypot(re, im) / 8;
  }
  return sum;
}

/**
 * Middle of a vial in mm, from the places where its two edges cross half of its level; pixels of 1 mm, x = 0 at pixel
 * 128. `near` lies well inside it, the edges within `reach` of that.
 */
function centreMm(profiles: Float32Array, near: number, reach: number): number {
  const middle = 128 + near;
  let level = 0;
  for (let i = -20; i <= 20; i++) level += valueAt(profiles, middle + i / 5) / 41;
  const edge = (side: number) => {
    let [inside, outside] = [0, reach];
    for (let i = 0; i < 20; i++) {
      const between = (inside + outside) / 2;
      if (valueAt(profiles, middle + side * between) > level / 2) inside = between;
      else outside = between;
    }
    return side * inside;
  };
  return near + (edge(-1) + edge(1)) / 2;
}

describe("the oil vial of `projection`", () => {
  test("is seen where the JSON says, and after the shift within 0.05 px of its true place; the water moves the other way", async () => {
    const seen = await reconstructed(RAW);
    expect(Math.abs(centreMm(seen.result, 16, 10) - FACTS.oil_seen_centre_mm)).toBeLessThan(0.05);
    const moved = await reconstructed(RAW, ["shift-readout.offset=fat"]);
    expect(Math.abs(centreMm(moved.result, 18, 10) - FACTS.oil_true_centre_mm)).toBeLessThan(0.05);
    // the vial on the left is at -62 mm; the oil's displacement, turned round, is +2.17 px of 1 mm
    const water = centreMm(moved.result, -60, 15) - centreMm(seen.result, -62, 15);
    expect(Math.abs(water + FACTS.fat_shift_px)).toBeLessThan(0.05);
  });

  test("Hz, ppm and fat are the same", async () => {
    const fat = await reconstructed(RAW, ["shift-readout.offset=fat"]);
    // the script's gyromagnetic ratio is CODATA 2018, and the header's frequency is rounded to 1 Hz: 1e-8
    for (const setting of [`shift-readout.offset=${FACTS.fat_offset_Hz}`, "shift-readout.offset=-3.4 ppm"])
      expect(relativeDifference((await reconstructed(RAW, [setting])).result, fat.result)).toBeLessThan(1e-6);
  });
});

test("a shift on reversed lines goes the other way: a file with both keeps its image only up to that", async () => {
  const file = "data/conformance/asymmetric-echo.h5"; // every second line runs backward
  const still = await reconstructed(file);
  const moved = await reconstructed(file, ["shift-readout.offset=500 Hz"]);
  const back = await reconstructed(file, ["shift-readout.offset=0"]);
  expect(relativeDifference(back.coils, still.coils)).toBe(0);
  // lines that move apart make a ghost half a field of view away: the image is no longer the same
  expect(relativeDifference(moved.coils, still.coils)).toBeGreaterThan(0.1);
});

test.each(["fatt", "3.4", "ppm", "1..2 Hz"])("%s is no offset", (offset) => {
  expect(() => shiftReadout.parse({ offset })).toThrow(
    /shift-readout\.offset is .*; must be fat, a number of Hz/,
  );
});
