import { type Plan, planRecipe } from "../../src/engine/plan.js";
import { run } from "../../src/engine/run.js";
import type { ScanFacts, ScanOverrides } from "../../src/physics/scan.js";
import { defaultRecipe } from "../../src/recipe/default-recipe.js";
import { applySetting, type Recipe } from "../../src/recipe/recipe.js";
import { type Finding, floatCount, type NoiseState } from "../../src/stages/stage.js";

export interface Reconstructed {
  /** All groups one after the other, as the arrays of a file. */
  readonly result: Float32Array;
  readonly coils: Float32Array;
  readonly plan: Plan;
  readonly facts: ScanFacts;
  readonly noise: NoiseState;
  readonly codes: readonly string[];
  /** Maps by name, of all groups one after the other. */
  readonly maps: ReadonlyMap<string, Float32Array>;
  readonly findings: readonly Finding[];
}

/** Reconstruct a file in memory with its default recipe and some settings. */
export async function reconstructed(
  file: string,
  settings: readonly string[] = [],
  overrides: Partial<ScanOverrides> = {},
  options: { blockRows?: number } = {},
  change: (recipe: Recipe) => Recipe = (recipe) => recipe,
): Promise<Reconstructed> {
  const results: Float32Array[] = [];
  const coils: Float32Array[] = [];
  const maps: Map<string, Float32Array>[] = [];
  const findings: Finding[][] = [];
  let noise: NoiseState = { whitened: false, gain: 0 };
  const { plan, scan } = await run(
    file,
    { keepCoils: true, workers: 1, overrides, ...options },
    (facts) => {
      const recipe = settings.reduce(
        (recipe, text) => applySetting(recipe, text),
        change(defaultRecipe(facts, file).recipe),
      );
      return { recipe, plan: planRecipe(facts, recipe) };
    },
    () => ({
      use: async (group, [done]) => {
        if (!done) return;
        results[group] = done.result.data.slice();
        coils[group] = done.coils!.data.slice();
        maps[group] = new Map(done.maps.map(({ name, data }) => [name, data]));
        findings[group] = [...done.findings];
        noise = done.result.noise;
      },
      abort: () => {
        results.length = 0;
      },
    }),
  );
  const join = (parts: Float32Array[], each: number) => {
    const all = new Float32Array(each * plan.groups);
    parts.forEach((part, group) => void all.set(part, group * each));
    return all;
  };
  return {
    result: join(results, floatCount(plan.result)),
    coils: join(coils, floatCount(plan.coils)),
    plan,
    facts: scan.facts,
    noise,
    maps: new Map(
      [...maps[0]!.keys()].map((name) => {
        const parts = maps.map((group) => group.get(name)).filter((part) => part !== undefined);
        return [name, join(parts, parts[0]!.length)];
      }),
    ),
    findings: findings.flat(),
    codes: scan.discrepancies.map(({ code }) => code),
  };
}

/** ||a - b|| / ||b||. */
export function relativeDifference(a: ArrayLike<number>, b: ArrayLike<number>): number {
  let difference = 0;
  let norm = 0;
  for (let i = 0; i < b.length; i++) {
    difference += (a[i]! - b[i]!) ** 2;
    norm += b[i]! ** 2;
  }
  return a.length === b.length ? Math.sqrt(difference / norm) : Number.NaN;
}
