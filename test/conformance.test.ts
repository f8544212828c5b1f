import { expect, test } from "vitest";
import { planRecipe } from "../src/engine/plan.js";
import { reconstruct } from "../src/engine/reconstruct.js";
import { readScan } from "../src/engine/scan.js";
import { createPlainKernels } from "../src/kernels/plain-kernels.js";
import { defaultRecipe } from "../src/recipe/default-recipe.js";
import { applySetting } from "../src/recipe/recipe.js";
import { readNpy } from "../src/writers/npy.js";

const dir = process.env.CONFORMANCE ?? "data/conformance";
for (const [name, what] of [
  ["multislice-noise", "coil-images"],
  ["standard-placement", "zero-filled"],
  ["asymmetric-echo", "zero-filled"],
  ["volume", "image"],
  ["projection", "profiles"],
  ["oblique", "coil-images"],
] as const)
  test(name, async () => {
    const scan = await readScan(`${dir}/${name}.h5`);
    console.log(name, scan.discrepancies);
    const { recipe } = defaultRecipe(scan.facts, scan.file);
    const plan = planRecipe(scan.facts, applySetting(recipe, "prewhiten=off"));
    const truth = readNpy(`${dir}/${name}.${what}.npy`).data as Float32Array;
    const out = new Float32Array(truth.length);
    await reconstruct(scan, plan, { kernels: createPlainKernels(), keepCoils: true }, (group, r) => {
      out.set(r.coils!.data, group * r.coils!.data.length);
    });
    let e = 0,
      n = 0;
    for (let i = 0; i < truth.length; i++) {
      e += (out[i]! - truth[i]!) ** 2;
      n += truth[i]! ** 2;
    }
    console.log(name, Math.sqrt(e / n));
    expect(Math.sqrt(e / n)).toBeLessThan(1e-5);
  });
