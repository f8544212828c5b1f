import { describe, expect, test } from "vitest";
import { withShortcuts } from "../../src/recipe/shortcuts.js";
import {
  answer,
  COMMITTED,
  hasH5py,
  objectDifference,
  objectOf,
  otherSeed,
} from "../support/conformance-cases.js";
import { reconstructed } from "../support/reconstruct.js";

const CASE = "fat-water-echoes";

async function separated(folder: string, settings: readonly string[] = []) {
  const { maps, findings } = await reconstructed(`${folder}/${CASE}.h5`, settings, {}, {}, (recipe) =>
    withShortcuts(recipe, { separate: "fat-water" }),
  );
  return {
    water: maps.get("water")!,
    fat: maps.get("fat")!,
    fraction: maps.get("fat-fraction")!,
    maps,
    findings,
  };
}

/** Share of the object's pixels with the other species in excess, where one clearly prevails in truth. */
function swapped(
  found: { water: Float32Array; fat: Float32Array },
  water: Float32Array,
  fat: Float32Array,
): number {
  const object = objectOf(water.map((value, i) => Math.hypot(value, fat[i]!)));
  let [swaps, pixels] = [0, 0];
  object.forEach((inside, i) => {
    pixels += inside;
    const prevails = Math.abs(water[i]! - fat[i]!) > 0.5 * (water[i]! + fat[i]!);
    if (inside && prevails && water[i]! > fat[i]! !== found.water[i]! > found.fat[i]!) swaps++;
  });
  return swaps / pixels;
}

/** Everything is estimated from the raw file. In brackets: NumPy with the true field. */
function cases(folder: string) {
  test("water within 1.5 % (0.5 %), fat within 2 % (0.7 %), below 0.1 % of the object swapped", async () => {
    const [water, fat] = [answer(folder, CASE, "water-magnitude"), answer(folder, CASE, "fat-magnitude")];
    const found = await separated(folder);
    expect(objectDifference(found.water, water)).toBeLessThan(0.015);
    expect(objectDifference(found.fat, fat)).toBeLessThan(0.02);
    expect(swapped(found, water, fat)).toBeLessThan(0.001);
    expect(Math.max(...found.fraction)).toBeLessThan(1.2); // noise in a pixel of fat alone, no division by nothing
  });
}

describe(CASE, () => {
  cases(COMMITTED);

  test("R2* and an odd/even phase that are not there are found to be nothing, and cost little", async () => {
    const found = await separated(COMMITTED, [
      "separate-fat-water.decay=true",
      "separate-fat-water.echo-phase=true",
    ]);
    const water = answer(COMMITTED, CASE, "water-magnitude");
    expect(objectDifference(found.water, water)).toBeLessThan(0.015);
    const phase = found.findings.find(({ name }) => name === "odd/even echo phase, rad")!.value;
    expect(Math.abs(phase)).toBeLessThan(0.01); // the case states none
    const object = objectOf(water);
    const decay = found.maps.get("r2star-per-second")!.filter((_, i) => object[i]);
    expect(decay.reduce((sum, value) => sum + value, 0) / decay.length).toBeLessThan(5);
  });

  test("magnitudes alone tell water and fat apart by fat's several peaks", async () => {
    const found = await separated(COMMITTED, ["separate-fat-water.fit=magnitude"]);
    const water = answer(COMMITTED, CASE, "water-magnitude");
    expect(objectDifference(found.water, water)).toBeLessThan(0.015);
    expect(objectDifference(found.fat, answer(COMMITTED, CASE, "fat-magnitude"))).toBeLessThan(0.05); // ill-posed near equal parts
  });

  test("one peak for fat's six leaves more, in the fat and in the residual", async () => {
    const [six, one] = [
      await separated(COMMITTED),
      await separated(COMMITTED, ["separate-fat-water.spectrum=one-peak"]),
    ];
    const energy = (map: Float32Array) => map.reduce((sum, value) => sum + value * value, 0);
    expect(energy(one.maps.get("fat-water-residual")!)).toBeGreaterThan(
      4 * energy(six.maps.get("fat-water-residual")!),
    );
  });
});
describe.skipIf(!hasH5py)(`${CASE}, another seed (skipped without h5py)`, () => cases(otherSeed([CASE])));
