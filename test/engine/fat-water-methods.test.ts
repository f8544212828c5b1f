import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { withShortcuts } from "../../src/recipe/shortcuts.js";
import { type AcquisitionOptions, simulateRaw } from "../../src/simulate/index.js";
import { magnitudes, objectDifference } from "../support/conformance-cases.js";
import { reconstructed } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("fat-water");
const at = (name: string) => path.join(folder, `${name}.h5`);

/** One fat peak at -3.4 ppm, 1.5 T: half a turn in 2.3026 ms [computed with NumPy: S2]. */
const HALF_TURN = 2.3026e-3;
const BASE: AcquisitionOptions = {
  phantom: "belfry",
  matrix: { x: 96, y: 96 },
  coils: 3,
  slices: 1,
  dwellSeconds: 12e-6, // 434 Hz per pixel: fat half a pixel away
  fatSpectrum: [{ ppm: -3.4, share: 1 }],
  offResonanceHz: 15,
  fieldSlopeHzPerMm: { x: 0.4, y: -0.2 },
  noise: { sigma: 0.005 },
};

beforeAll(async () => {
  const write = (name: string, options: AcquisitionOptions) =>
    simulateRaw({ ...BASE, ...options, file: at(name) });
  await write("two", { echoTimesSeconds: [HALF_TURN, 2 * HALF_TURN] });
  const steep = { x: 1.5, y: -1 }; // a vial of water apart from the rest lies 160 Hz from zero
  await write("two, steep", { echoTimesSeconds: [HALF_TURN, 2 * HALF_TURN], fieldSlopeHzPerMm: steep });
  await write("in phase", { echoTimesSeconds: [2, 4, 6].map((n) => n * HALF_TURN) });
  await write("three", { echoTimesSeconds: [2 * HALF_TURN, 3 * HALF_TURN, 4 * HALF_TURN] });
  await write("alternating", { echoTimesSeconds: [HALF_TURN, 2 * HALF_TURN], reversedEchoes: "odd" });
  await write("odd times", { echoTimesSeconds: [2.6e-3, 4e-3, 5.4e-3] });
  // What water alone gives, without a field.
  const still = { offResonanceHz: 0, fieldSlopeHzPerMm: { x: 0, y: 0 }, noise: { sigma: 0 } };
  await write("water", { ...still, fatSpectrum: [], echoTimesSeconds: [HALF_TURN] });
  // Water and fat together at an echo time of a whole turn less the readout's shift would need both; fat's own place is
  // that of the difference of a scan with and without it, its frequency set to water's.
  await write("both", { ...still, fatSpectrum: [{ ppm: 0, share: 1 }], echoTimesSeconds: [HALF_TURN] });
}, 60_000);

async function separated(name: string, ...settings: readonly string[]) {
  const all = ["prewhiten=off", "separate-fat-water.spectrum=one-peak", ...settings];
  const { maps } = await reconstructed(at(name), all, {}, {}, (recipe) =>
    withShortcuts(recipe, { separate: "fat-water" }),
  );
  return { water: maps.get("water")!, fat: maps.get("fat")! };
}

async function truth(name: string): Promise<Float32Array> {
  const { result, plan } = await reconstructed(at(name), ["prewhiten=off"]);
  return magnitudes(result, plan.result.kind);
}

describe("the methods that find the field", () => {
  test.each([
    ["two", "two-point"],
    ["two, steep", "two-point"],
    ["three", "three-point"],
    ["odd times", "least-squares"],
  ])("%s echoes, %s: water and fat in their true places", async (name, method) => {
    const [water, both] = [await truth("water"), await truth("both")];
    // water and fat have the same coils, so that magnitudes add
    const fat = both.map((value, i) => Math.max(0, value - water[i]!));
    const found = await separated(name, `separate-fat-water.method=${method}`);
    // Noise of half a per cent, and edges that two echoes solve less well than three.
    expect(objectDifference(found.water, water)).toBeLessThan(0.03);
    expect(objectDifference(found.fat, fat)).toBeLessThan(0.06);
  });

  test.each([
    ["odd times", "two-point", /needs an echo in phase and one opposed; fat is/],
    ["odd times", "three-point", /needs fat in phase, opposed and in phase/],
    ["alternating", "two-point", /compares echoes pixel by pixel: all must be read in one direction/],
    ["two", "least-squares", /needs 3 echoes, the file has 2.*--set separate-fat-water.method=two-point/],
    ["in phase", "least-squares", /these echo times hardly tell fat from water: noise of [\d.]+ times/],
    ["two", "three-point", /needs 3 echoes, the file has 2/],
  ])("%s echoes, %s: refused", async (name, method, rule) => {
    await expect(separated(name, `separate-fat-water.method=${method}`)).rejects.toThrow(rule);
  });

  test("a spectrum that adds up to nothing, and a phase between echoes that are all read alike, are refused", async () => {
    await expect(separated("three", "separate-fat-water.spectrum=[[-3.4, 0]]")).rejects.toThrow(
      /add up to more than 0/,
    );
    await expect(separated("three", "separate-fat-water.echo-phase=true")).rejects.toThrow(
      /no odd\/even phase/,
    );
  });

  test("one field in a recipe", async () => {
    await expect(separated("three", "field-map=on")).rejects.toThrow(
      /an earlier stage makes a field map already/,
    );
  });
});
