import path from "node:path";
import type { Variant } from "../engine/compare.js";
import { UsageError } from "../errors.js";
import type { ScanOverrides } from "../physics/scan.js";
import { applySetting, EMPTY_RECIPE } from "../recipe/recipe.js";
import type { Flags } from "./command.js";
import { refuseLargeGrid } from "./compare.js";
import { requestOf } from "./plan-file.js";

/**
 * The variants that the flags ask for: every recipe (or the default one), with every combination of the values to vary.
 * @throws UsageError for a form that is wrong, fewer than two variants, or too many
 */
export function variantsOf(flags: Flags): { variants: Variant[]; overrides: ScanOverrides } {
  const recipes = (flags.recipe as string[] | undefined) ?? [undefined];
  const grid = ((flags.vary as string[] | undefined) ?? []).map(settingsOf);
  const count = grid.reduce((product, settings) => product * settings.length, recipes.length);
  if (count < 2)
    throw new UsageError(
      { field: "--vary" },
      "needs two variants or more",
      "For example: --vary apodize.window=none,hann, or two recipes",
    );
  refuseLargeGrid(count);
  const combinations = grid.reduce<string[][]>(
    (before, settings) => before.flatMap((chosen) => settings.map((setting) => [...chosen, setting])),
    [[]],
  );
  const common = (flags.set as string[] | undefined) ?? [];
  const named = recipes.flatMap((recipe) =>
    combinations.map((settings) => {
      const { recipe: _, ...rest } = flags;
      const own = { ...rest, set: [...common, ...settings], ...(recipe !== undefined && { recipe }) };
      const base = recipe !== undefined && recipes.length > 1 ? [path.basename(recipe)] : [];
      return { name: [...base, ...settings].join(", ") || "default", request: requestOf(own) };
    }),
  );
  const twice = named.find(({ name }, i) => named.findIndex((other) => other.name === name) < i);
  if (twice)
    throw new UsageError({ field: "--vary", value: twice.name }, "occurs twice", "Name each variant once");
  return {
    variants: named.map(({ name, request }) => ({ name, prepare: request.prepare })),
    overrides: named[0]!.request.overrides,
  };
}

/** `stage.key=a,b` as `stage.key=a` and `stage.key=b`; commas in brackets and quotes do not part. */
export function settingsOf(text: string): string[] {
  const match = /^([a-z0-9.-]+)=(.+)$/s.exec(text);
  if (!match)
    throw new UsageError(
      { field: "--vary", value: text },
      "must be of the form STAGE.KEY=A,B",
      "For example: --vary apodize.window=none,hann,tukey:0.5",
    );
  const [, key, values] = match as unknown as [string, string, string];
  if (key.startsWith("scan."))
    throw new UsageError(
      { field: "--vary", value: text },
      "how the file is read cannot vary",
      "Compare two runs",
    );
  const settings = parted(values).map((value) => `${key}=${value.trim()}`);
  for (const setting of settings) applySetting(EMPTY_RECIPE, setting, "--vary"); // what is wrong in it names this flag
  return settings;
}

function parted(text: string): string[] {
  const parts = [""];
  let depth = 0;
  let quote = "";
  for (const character of text) {
    if (quote) quote = character === quote ? "" : quote;
    else if (character === '"' || character === "'") quote = character;
    else if ("[{(".includes(character)) depth++;
    else if ("]})".includes(character)) depth--;
    if (character === "," && depth === 0 && !quote) parts.push("");
    else parts[parts.length - 1] += character;
  }
  return parts;
}
