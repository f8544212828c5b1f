import path from "node:path";
import { describe, expect, test } from "vitest";
import { planRecipe } from "../../src/engine/plan.js";
import { run } from "../../src/engine/run.js";
import { readScan } from "../../src/engine/scan.js";
import { affineLps } from "../../src/physics/geometry.js";
import { defaultRecipe } from "../../src/recipe/default-recipe.js";
import { applySetting } from "../../src/recipe/recipe.js";
import { readNpy } from "../../src/writers/npy.js";
import { COMMITTED, hasH5py, otherSeed } from "../support/conformance-cases.js";

/** Cases, the answer to compare with, and whether it is of the channels or of the combined image. */
const CASES = [
  ["multislice-noise", "coil-images", "coils"],
  ["multislice-noise", "rss", "result"],
  ["standard-placement", "zero-filled", "result"],
  ["asymmetric-echo", "zero-filled", "coils"],
  ["volume", "image", "result"],
  ["projection", "profiles", "result"],
  ["oblique", "coil-images", "coils"],
] as const;

/**
 * The promise is 1e-5 of the answer's norm. float32 transforms of a few hundred points have an error near 2e-7, the
 * answers are stored as complex64 (6e-8): 1e-6 leaves room for no mistake.
 */
const BOUND = 1e-6;

async function difference(
  folder: string,
  name: string,
  what: string,
  which: "coils" | "result",
  transform: "simd" | "plain",
) {
  const truth = readNpy(path.join(folder, `${name}.${what}.npy`)).data as Float32Array;
  const found = new Float32Array(truth.length);
  const file = path.join(folder, `${name}.h5`);
  await run(
    file,
    { keepCoils: true, transform, workers: 1 },
    (facts) => {
      const recipe = applySetting(defaultRecipe(facts, file).recipe, "prewhiten=off");
      return { recipe, plan: planRecipe(facts, recipe) };
    },
    () => ({
      use: async (group, [result]) => {
        const { data } = result![which]!;
        found.set(data, group * data.length);
      },
      abort: () => undefined,
    }),
  );
  let error = 0;
  let norm = 0;
  truth.forEach((value, i) => {
    error += (found[i]! - value) ** 2;
    norm += value ** 2;
  });
  return Math.sqrt(error / norm);
}

describe.each(["simd", "plain"] as const)("%s transforms", (transform) => {
  test.each(CASES)("%s: %s", async (name, what, which) => {
    expect(await difference(COMMITTED, name, what, which, transform)).toBeLessThan(BOUND);
  });
});

describe.skipIf(!hasH5py)("another seed: other anatomy and noise (skipped without h5py)", () => {
  const folder = otherSeed([...new Set(CASES.map(([name]) => name))]);
  test.each(CASES)("%s: %s", async (name, what, which) => {
    expect(await difference(folder, name, what, which, "simd")).toBeLessThan(BOUND);
  });
});

test("oblique: the affine of each slice, steps to 1e-6 mm", async () => {
  const { facts } = await readScan(`${COMMITTED}/oblique.h5`);
  const truth = readNpy(`${COMMITTED}/oblique.affine-lps.npy`).data as Float64Array;
  const matrix = { x: 144, y: 144, z: 1 };
  facts.poses.forEach((pose, slice) => {
    const affine = affineLps(pose!, { x: 240 / 144, y: 240 / 144, z: 6 }, matrix);
    // The head stores directions and positions as float32, 3e-8 of each: over the 120 mm from centre to corner, and
    // of a position of 40 mm, that is up to 4e-6 mm, which no reader can undo.
    affine.forEach((value, i) => {
      expect(Math.abs(value - truth[16 * slice + i]!)).toBeLessThan(i % 4 === 3 ? 5e-6 : 1e-6);
    });
  });
  expect(facts.sliceOrder).toEqual([3, 2, 1, 0]);
});
