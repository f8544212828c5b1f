import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { reconstructVariants, type Variant } from "../../src/engine/compare.js";
import { MEASURES, measureVariants } from "../../src/engine/compare-measures.js";
import { planRecipe } from "../../src/engine/plan.js";
import { regionMask } from "../../src/kernels/region.js";
import { defaultRecipe } from "../../src/recipe/default-recipe.js";
import { applySetting } from "../../src/recipe/recipe.js";
import { simulateRaw } from "../../src/simulate/index.js";
import { COMMITTED, magnitudes } from "../support/conformance-cases.js";
import { reconstructed } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("compare");
const file = path.join(folder, "disc.h5");
const SIZE = 96;
beforeAll(() =>
  simulateRaw({
    file,
    phantom: "disc",
    matrix: { x: SIZE, y: SIZE },
    fovMm: { x: 192, y: 192 },
    coils: 4,
    slices: 2,
    fatSpectrum: [],
    noise: { sigma: 0.02, readouts: 64 },
  }),
);

const variantOf = (raw: string, ...settings: string[]): Variant => ({
  name: settings.join(", ") || "default",
  prepare(facts) {
    const recipe = settings.reduce(
      (recipe, text) => applySetting(recipe, text),
      defaultRecipe(facts, raw).recipe,
    );
    return { recipe, plan: planRecipe(facts, recipe) };
  },
});
const variant = (...settings: string[]) => variantOf(file, ...settings);
const OPTIONS = { mostImages: 4, workers: 1 };

describe("variants", () => {
  test("are the images of each recipe alone, to the bit, in one pass where readout stages are alike", async () => {
    const settings = [
      [],
      ["apodize.window=hann"],
      ["apodize.window=tukey:0.5", "apodize.axes=[y]"],
      ["fit-matrix=off"],
    ];
    const { variants, passes, places } = await reconstructVariants(
      file,
      settings.map((each) => variant(...each)),
      OPTIONS,
    );
    expect(passes).toBe(1);
    expect(places.map(({ frame }) => frame)).toEqual([0, 1]);
    for (const [v, each] of settings.entries()) {
      const alone = await reconstructed(file, each);
      const images = magnitudes(alone.result, alone.plan.result.kind);
      variants[v]!.images.forEach((image, i) => {
        expect(image).toEqual(images.subarray(i * image.length, (i + 1) * image.length));
      });
      const channels = 2 * SIZE * SIZE * 4;
      expect(variants[v]!.channels).toEqual(alone.coils.subarray(channels, 2 * channels)); // the second slice is shown
    }
  });

  test("with other readout stages need another pass, and give the same", async () => {
    const both = [variant(), variant("prewhiten=off")];
    const { variants, passes } = await reconstructVariants(file, both, OPTIONS);
    expect(passes).toBe(2);
    const alone = await reconstructed(file, ["prewhiten=off"]);
    expect(variants[1]!.images[0]).toEqual(alone.result.subarray(0, SIZE * SIZE));
  });

  test("stages before the first that differs run once: a field map is measured once for two ways to use it", async () => {
    const echoes = path.join(folder, "echoes.h5");
    await simulateRaw({
      file: echoes,
      phantom: "disc",
      matrix: { x: 64, y: 64 },
      coils: 2,
      slices: 1,
      echoTimesSeconds: [0.004, 0.006],
      dwellSeconds: 25e-6,
      fieldSlopeHzPerMm: { x: 1, y: 0 },
    });
    const base = ["trim-oversampling=off", "fit-matrix.readout-margin=keep", "field-map=on"];
    const both = [
      variant(...base, "undisplace.jacobian=true"),
      variant(...base, "undisplace.jacobian=false"),
    ];
    const { variants, passes } = await reconstructVariants(echoes, both, OPTIONS);
    expect(passes).toBe(1);
    for (const [v, jacobian] of [true, false].entries()) {
      const alone = await reconstructed(echoes, [...base, `undisplace.jacobian=${jacobian}`]);
      expect(variants[v]!.images[1]).toEqual(alone.result.subarray(64 * 64));
    }
  });
});

const REGION = regionMask(
  { shape: "ellipse", unit: "px", centreX: SIZE / 2, centreY: SIZE / 2, width: 40, height: 40 },
  { height: SIZE, width: SIZE },
);

describe("measures", () => {
  test("propagated and replicated noise agree: in the mean to 1 %, pixel by pixel to the replicas' own error", async () => {
    const count = 200;
    const windows = ["none", "hann", "tukey:0.5"].map((window) => variant(`apodize.window=${window}`));
    const compared = await reconstructVariants(file, windows, { ...OPTIONS, replicaCount: count, seed: 5 });
    const { values, noiseMaps } = measureVariants(
      compared.variants,
      compared.variants[0]!,
      compared.shown,
      { region: REGION },
      compared.scan.facts,
    );
    for (const [v, { deviation }] of compared.variants.entries()) {
      const { noiseTheory, noiseMeasured } = values[v]! as { noiseTheory: number; noiseMeasured: number };
      expect(Math.abs(noiseMeasured / noiseTheory - 1)).toBeLessThan(0.01);
      // A deviation from R replicas has a standard error of 1 / sqrt(2 (R - 1)): 5 % of it; 2.576 of them hold 99 %.
      const bound = 2.576 / Math.sqrt(2 * (count - 1));
      let [within, pixels] = [0, 0];
      REGION.forEach((inside, i) => {
        if (!inside) return;
        pixels++;
        if (Math.abs(deviation![i]! / noiseMaps[v]![i]! - 1) < bound) within++;
      });
      expect(within / pixels).toBeGreaterThan(0.97);
    }
  });

  test("without whitening the receiver's own noise is carried on: as replicas find it, where channels are nearly alike", async () => {
    const compared = await reconstructVariants(
      file,
      [variant("prewhiten=off"), variant("prewhiten=off", "apodize.window=hann")],
      { ...OPTIONS, replicaCount: 60, seed: 2 },
    );
    const { values } = measureVariants(
      compared.variants,
      compared.variants[0]!,
      compared.shown,
      { region: REGION },
      compared.scan.facts,
    );
    // The simulator's channels have gains from 1 to 1.5 and are correlated by 0.3: taken as alike, within a quarter.
    for (const each of values as { noiseTheory: number; noiseMeasured: number }[])
      expect(Math.abs(each.noiseMeasured / each.noiseTheory - 1)).toBeLessThan(0.25);
  });

  test("air too: the deviation of the root of the sum of squares without signal", async () => {
    const compared = await reconstructVariants(file, [variant(), variant("apodize.window=hann")], {
      ...OPTIONS,
      replicaCount: 100,
    });
    const { deviation } = compared.variants[0]!;
    // A corner: four channels, so 0.69534 [computed with SciPy: S4], in the data's own noise already: with it twice the variance.
    const corner = regionMask(
      { shape: "rectangle", unit: "px", centreX: 6, centreY: 6, width: 10, height: 10 },
      { height: SIZE, width: SIZE },
    );
    const mean = deviation!.reduce((sum, value, i) => sum + (corner[i] ? value : 0), 0) / 100;
    expect(mean).toBeGreaterThan(0.69534); // pixels that are not zero to begin with vary more
    expect(mean).toBeLessThan(1.05);
  });

  test("theory and measurement of width and ringing, differences, and what cannot be had", async () => {
    const settings = ["none", "hann", "hamming"].map((window) => variant(`apodize.window=${window}`));
    const { variants, shown, scan } = await reconstructVariants(
      file,
      [...settings, variant("fit-matrix=off")],
      OPTIONS,
    );
    const { values, edge, profiles } = measureVariants(
      variants,
      variants[0]!,
      shown,
      { region: REGION },
      scan.facts,
    );
    expect(edge).toBeDefined();
    expect(profiles).toHaveLength(4);
    expect(Object.keys(values[0]!)).toEqual(MEASURES.map(({ id }) => id));
    const [none, hann] = values as Record<string, number>[];
    expect(none!.widthTheoryMm).toBeCloseTo(1.2067 * 2, 2); // pixels of 2 mm; 96 samples
    expect(hann!.widthTheoryMm).toBeCloseTo(2 * 2, 2);
    for (const each of values.slice(0, 3) as Record<string, number>[])
      expect(Math.abs(each.widthMeasuredMm! / each.widthTheoryMm! - 1)).toBeLessThan(0.06); // noise, shading, a round edge
    expect(none!.overshootMeasured).toBeGreaterThan(4);
    expect(hann!.overshootMeasured).toBeLessThan(3);
    expect(none).toMatchObject({ nrmse: 0, psnrDb: null, ssim: 1 });
    expect(hann!.snr! / none!.snr!).toBeCloseTo(1 / 0.375, 1); // two axes of 1 / sqrt(0.375)
  });

  test("width, overshoot and undershoot are those of theory on an object without noise and shading", async () => {
    const clean = path.join(folder, "clean.h5");
    await simulateRaw({
      file: clean,
      phantom: "disc",
      matrix: { x: 192, y: 192 },
      fovMm: { x: 240, y: 240 },
      coils: 1,
      slices: 1,
      fatSpectrum: [],
      noise: { sigma: 0 },
    });
    const windows = ["none", "hann", "tukey:0.5"].map((window) =>
      variantOf(clean, `apodize.window=${window}`),
    );
    const { variants, shown, scan } = await reconstructVariants(clean, windows, OPTIONS);
    const region = new Uint8Array(192 * 192).fill(1);
    const { values, remarks } = measureVariants(variants, variants[0]!, shown, { region }, scan.facts);
    expect(remarks).toEqual([]);
    for (const each of values as Record<string, number>[]) {
      expect(Math.abs(each.widthMeasuredMm! / each.widthTheoryMm! - 1)).toBeLessThan(0.02);
      // 2 % of the ringing without a window, 8.95 % of the jump: a share of one that hardly rings would be of nothing
      expect(Math.abs(each.overshootMeasured! - each.overshootTheory!)).toBeLessThan(0.02 * 8.95);
      expect(Math.abs(each.undershootMeasured! - each.undershootTheory!)).toBeLessThan(0.02 * 8.95);
    }
  });
});

describe("variants of other fields of view", () => {
  const measured = async (raw: string, ...variants: Variant[]) => {
    const compared = await reconstructVariants(raw, variants, { ...OPTIONS, mostImages: 100 });
    const [first] = compared.variants;
    const region = new Uint8Array(first!.width * first!.height).fill(1);
    return {
      ...compared,
      ...measureVariants(compared.variants, first!, compared.shown, { region }, compared.scan.facts),
    };
  };

  test("along z the same planes are compared: those of a volume do not change where its margin is kept", async () => {
    const raw = path.join(COMMITTED, "volume.h5"); // 12 partitions encoded, 10 wanted
    const both = ["fit-matrix=on", "fit-matrix=off"].map((setting) => variantOf(raw, setting));
    for (const [order, indices] of [
      [both, [0, 1, 2, 3, 4, 5, 6, 7, 8, 9]],
      [both.toReversed(), [1, 2, 3, 4, 5, 6, 7, 8, 9, 10]],
    ] as const) {
      const { variants, places, values, remarks } = await measured(raw, ...order);
      expect(remarks).toContainEqual(expect.stringContaining("not the windows' alone")); // 32 % beside it, of Gibbs' 9
      expect(places.map(({ z }) => z)).toEqual(indices);
      expect(variants[1]!.images).toEqual(variants[0]!.images);
      expect(variants[1]!.channels).toEqual(variants[0]!.channels);
      expect(values[1]).toMatchObject({ nrmse: 0, ssim: 1 });
    }
    const beyond = reconstructVariants(raw, both.toReversed(), { ...OPTIONS, image: 11 });
    await expect(beyond).rejects.toThrow("a variant does not reach so far along z");
  });

  test("along x the same edge is measured, and differences are not where pixels are not the same", async () => {
    const base = "fit-matrix=off";
    const { variants, values } = await measured(file, variant(base), variant(base, "trim-oversampling=off"));
    expect(variants.map(({ width }) => width)).toEqual([SIZE, 2 * SIZE]);
    const [trimmed, wide] = values as Record<string, number>[];
    // The trim changes no pixel; lines of other lengths are interpolated with other ends.
    expect(wide!.widthMeasuredMm! / trimmed!.widthMeasuredMm!).toBeCloseTo(1, 1);
    expect(Math.abs(wide!.overshootMeasured! - trimmed!.overshootMeasured!)).toBeLessThan(0.5);
    expect(wide!.nrmse).toBeNull();
  });
});
