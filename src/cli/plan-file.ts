import { readFileSync } from "node:fs";
import { planRecipe } from "../engine/plan.js";
import { readScan } from "../engine/scan.js";
import { InputError, UsageError } from "../errors.js";
import type { Discrepancy } from "../physics/scan.js";
import { defaultRecipe } from "../recipe/default-recipe.js";
import { applySetting, outputSettings, type Recipe, readRecipe, scanOverrides } from "../recipe/recipe.js";
import { type Flags, wholeNumber } from "./command.js";
import type { Terminal } from "./terminal.js";

/**
 * Read a raw file and work out its recipe from the flags: the recipe file or the default one, then every `--set`, then
 * the other flags. Flags come before the environment, the environment before the recipe, the recipe before defaults.
 */
export async function planFile(flags: Flags, terminal: Terminal, signal: AbortSignal) {
  const file = flags.raw as string;
  const recipeFile = flags.recipe as string | undefined;
  const settings = (flags.set as string[] | undefined) ?? [];
  const given = recipeFile === undefined ? undefined : readRecipe(textOf(recipeFile), recipeFile);
  const empty: Recipe = { carillon: 1, scan: {}, stages: given?.stages ?? [], outputs: {} };
  // A wrong setting must fail before a long file is read.
  const early = withFlags(settings.reduce(applySetting, given ?? empty), flags);
  const scan = await readScan(file, {
    overrides: scanOverrides(early),
    signal,
    progress: (done, total) => terminal.progress("reading", done, total),
  });
  const standard = given ? undefined : defaultRecipe(scan.facts, file);
  const base = given ?? (standard!.recipe as Recipe);
  const recipe = withFlags(settings.reduce(applySetting, base), flags);
  const plan = planRecipe(scan.facts, recipe, standard?.reasons);
  const strictError = (problem: Discrepancy) =>
    new InputError({ file }, problem.message, "Leave out --strict to reconstruct all the same");
  return {
    scan,
    plan,
    recipe,
    outputs: outputSettings(recipe, recipeFile),
    source: recipeFile ?? "default",
    strictError,
  };
}

/** `--group`, `--encoding` and the grey range as entries of the recipe, so that the sidecar keeps them. */
function withFlags(recipe: Recipe, flags: Flags): Recipe {
  const entries = (names: readonly string[]) =>
    Object.fromEntries(names.filter((name) => flags[name] !== undefined).map((name) => [name, flags[name]]));
  wholeNumber(flags, "encoding", 0);
  return {
    ...recipe,
    scan: { ...recipe.scan, ...entries(["group", "encoding"]) },
    outputs: { ...recipe.outputs, ...entries(["grey-low", "grey-high"]) },
  };
}

function textOf(file: string): string {
  try {
    return readFileSync(file, "utf8");
  } catch (error) {
    throw new UsageError(
      { file },
      `the recipe cannot be read: ${(error as Error).message.split(",")[0]}`,
      "Check the path",
    );
  }
}
