import { readFileSync } from "node:fs";
import { readArrays } from "../engine/input-arrays.js";
import { planRecipe } from "../engine/plan.js";
import type { Prepared } from "../engine/write-reconstruction.js";
import { UsageError } from "../errors.js";
import type { ScanFacts, ScanOverrides } from "../physics/scan.js";
import { defaultRecipe, refuseUnsupported } from "../recipe/default-recipe.js";
import {
  applySetting,
  EMPTY_RECIPE,
  outputSettings,
  type Recipe,
  readRecipe,
  scanOverrides,
} from "../recipe/recipe.js";
import { type Shortcuts, withShortcuts } from "../recipe/shortcuts.js";
import { stageById } from "../stages/registry.js";
import type { Flags } from "./command.js";

/** What the flags ask for, checked as far as it can be without the raw file. */
export interface Request {
  readonly overrides: ScanOverrides;
  /** Where the recipe comes from, for `--explain`. */
  readonly source: string;
  /** The recipe worked out for what the scan is, and why each stage of a default one is there. */
  prepare(facts: ScanFacts): Prepared & { readonly reasons: ReadonlyMap<string, string> };
}

/**
 * The recipe that the flags ask for: the recipe file or the default one, then every `--set`, then the other flags.
 * Flags come before the environment, the environment before the recipe, the recipe before defaults.
 * @param finish what the command itself needs in the recipe
 * @throws UsageError for whatever is wrong in them, before a long file is read
 */
export function requestOf(flags: Flags, finish: (recipe: Recipe) => Recipe = (recipe) => recipe): Request {
  const file = flags.raw as string;
  const recipeFile = flags.recipe as string | undefined;
  const settings = (flags.set as string[] | undefined) ?? [];
  const given = recipeFile === undefined ? undefined : readRecipe(textOf(recipeFile), recipeFile);
  const shortcuts = shortcutsOf(flags);
  const withSettings = (base: Recipe) => settings.reduce((recipe, text) => applySetting(recipe, text), base);
  const complete = (base: Recipe) => withFlags(finish(withSettings(withShortcuts(base, shortcuts))), flags);
  const early = complete(given ?? EMPTY_RECIPE);
  outputSettings(early, recipeFile);
  for (const { id, parameters } of early.stages) {
    const stage = stageById(id)!;
    readArrays(stage.files?.(stage.parse(parameters)) ?? []);
  }
  return {
    overrides: scanOverrides(early),
    source: recipeFile ?? "default",
    prepare(facts) {
      refuseUnsupported(facts, file);
      const standard = given ? undefined : defaultRecipe(facts, file);
      const recipe = complete(given ?? standard!.recipe);
      const reasons = standard?.reasons ?? new Map<string, string>();
      return {
        recipe,
        plan: planRecipe(facts, recipe, reasons),
        outputs: outputSettings(recipe, recipeFile),
        reasons,
      };
    },
  };
}

/** @throws UsageError for a choice of coordinates without a map that they could be of */
function shortcutsOf(flags: Flags): Shortcuts {
  // The parser has checked choices and types.
  const shortcuts = {
    ...(flags.undisplace !== undefined && { undisplace: flags.undisplace as string }),
    ...(flags["field-coordinates"] !== undefined && {
      fieldCoordinates: flags["field-coordinates"] as "object" | "image",
    }),
    ...(flags.separate !== undefined && { separate: flags.separate as "fat-water" }),
  };
  const { undisplace, fieldCoordinates } = shortcuts;
  if (fieldCoordinates && (undisplace === undefined || undisplace === "measured"))
    throw new UsageError(
      { field: "--field-coordinates", value: fieldCoordinates },
      "says where the pixels of a given map lie",
      "Give the map: --undisplace FIELD.npy",
    );
  return shortcuts;
}

/** `--group`, `--encoding` and the grey range as entries of the recipe, so that the sidecar keeps them. */
function withFlags(recipe: Recipe, flags: Flags): Recipe {
  const entries = (names: readonly string[]) =>
    Object.fromEntries(names.filter((name) => flags[name] !== undefined).map((name) => [name, flags[name]]));
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
