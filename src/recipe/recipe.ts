import { parse as parseYaml, stringify, YAMLParseError } from "yaml";
import { UsageError } from "../errors.js";
import type { FrameAxis } from "../physics/layout.js";
import type { ScanOverrides } from "../physics/scan.js";
import { nearest } from "../stages/nearest.js";
import { parseBySchema } from "../stages/parameters.js";
import { STAGES, stageById } from "../stages/registry.js";
import { outputsSchema, RECIPE_VERSION, scanSchema } from "./schema.js";

/** One stage of a recipe: its parameters as the user gave them. */
export interface RecipeStage {
  readonly id: string;
  readonly parameters: Readonly<Record<string, unknown>>;
}

/** A recipe as it is read, before stages parse their parameters. Keys of `scan` and `outputs` are those of the file. */
export interface Recipe {
  readonly carillon: number;
  readonly scan: Readonly<Record<string, unknown>>;
  readonly stages: readonly RecipeStage[];
  readonly outputs: Readonly<Record<string, unknown>>;
}

export const EMPTY_RECIPE: Recipe = { carillon: 1, scan: {}, stages: [], outputs: {} };

export interface OutputSettings {
  readonly pictures: boolean;
  readonly greyLow: number | undefined;
  readonly greyHigh: number | undefined;
  readonly pngBits: 8 | 16;
  readonly tileLimit: number;
}

const TOP_KEYS = ["carillon", "scan", "stages", "outputs"];

/**
 * Read a recipe from YAML text.
 * @throws UsageError for broken YAML, an unknown key or stage (with the nearest valid name), or another major version
 */
export function readRecipe(text: string, file: string): Recipe {
  let raw: unknown;
  try {
    raw = parseYaml(text);
  } catch (error) {
    if (!(error instanceof YAMLParseError)) throw error;
    const line = error.linePos?.[0].line;
    const field = line === undefined ? undefined : `line ${line}`;
    throw new UsageError(
      { file, field },
      `is not YAML: ${error.message.split("\n", 1)[0]}`,
      "Correct the recipe",
    );
  }
  if (!isMap(raw)) throw new UsageError({ file }, "must be a map", "Start from: carillon recipe RAW");
  for (const key of Object.keys(raw))
    if (!TOP_KEYS.includes(key)) throw unknownName(file, "recipe", key, TOP_KEYS);
  if (raw.carillon !== RECIPE_VERSION)
    throw new UsageError(
      { file, field: "carillon", value: raw.carillon ?? null },
      `must be ${RECIPE_VERSION}, the version of the recipe`,
      "Start from: carillon recipe RAW",
    );
  if (!Array.isArray(raw.stages))
    throw new UsageError(
      { file, field: "stages" },
      "must be a list of stages",
      "Start from: carillon recipe RAW",
    );
  const recipe = {
    carillon: RECIPE_VERSION,
    scan: mapOf(raw.scan, file, "scan"),
    stages: raw.stages.map((entry, i) => readStage(entry, file, i)),
    outputs: mapOf(raw.outputs, file, "outputs"),
  };
  // All that can be wrong without a scan is found here, in milliseconds.
  scanOverrides(recipe, file);
  outputSettings(recipe, file);
  for (const stage of recipe.stages) inFile(file, () => stageById(stage.id)!.parse(stage.parameters));
  return recipe;
}

function readStage(entry: unknown, file: string, position: number): RecipeStage {
  const field = `stages, entry ${position + 1}`;
  const [id, parameters, ...more] =
    typeof entry === "string" ? [entry, {}] : isMap(entry) ? Object.entries(entry).flat() : [];
  if (typeof id !== "string" || more.length)
    throw new UsageError(
      { file, field },
      "must be a stage's id, or a map of one id to its parameters",
      "For example: - apodize: { window: hann }",
    );
  if (!stageById(id))
    throw unknownName(
      file,
      field,
      id,
      STAGES.map((stage) => stage.id),
    );
  return { id, parameters: mapOf(parameters, file, `${field}: ${id}`) };
}

/** The recipe as YAML, ready to edit; `reasons` become comments. */
export function formatRecipe(recipe: Recipe, reasons: ReadonlyMap<string, string> = new Map()): string {
  const lines = [`carillon: ${RECIPE_VERSION}`];
  if (Object.keys(recipe.scan).length) lines.push(stringify({ scan: recipe.scan }).trimEnd());
  lines.push("stages:");
  for (const { id, parameters } of recipe.stages) {
    const reason = reasons.get(id);
    if (reason) lines.push(`  # ${reason}`);
    const inline = Object.keys(parameters).length
      ? `: ${stringify(parameters, { collectionStyle: "flow", lineWidth: 0 }).trimEnd()}`
      : "";
    lines.push(`  - ${id}${inline}`);
  }
  if (Object.keys(recipe.outputs).length) lines.push(stringify({ outputs: recipe.outputs }).trimEnd());
  return `${lines.join("\n")}\n`;
}

/** The recipe's `scan`, defaults filled in. @throws UsageError */
export function scanOverrides(recipe: Pick<Recipe, "scan">, file?: string): ScanOverrides {
  const s = parseBySchema<Record<string, unknown>>("scan", scanSchema, recipe.scan, file);
  // The schema has checked each type.
  return {
    ...("group" in s && { group: s.group as string }),
    encoding: s.encoding as number,
    duplicates: s.duplicates as "mean" | "last",
    averageOver: s["average-over"] as FrameAxis[],
    ...("sample-time-us" in s && { sampleTimeUs: s["sample-time-us"] as number }),
    ...("resonance-hz" in s && { resonanceHz: s["resonance-hz"] as number }),
    ...("echo-ms" in s && { echoMs: s["echo-ms"] as number[] }),
    ...("receiver-noise-bandwidth" in s && {
      receiverNoiseBandwidth: s["receiver-noise-bandwidth"] as number,
    }),
    readoutPolarity: s["readout-polarity"] as ScanOverrides["readoutPolarity"],
    centre: s.centre as ScanOverrides["centre"],
    conjugate: s.conjugate as boolean,
    alternateSign: s["alternate-sign"] as boolean,
    recentreMm: s["recentre-mm"] as [number, number, number],
  };
}

/** The recipe's `outputs`, defaults filled in. @throws UsageError */
export function outputSettings(recipe: Pick<Recipe, "outputs">, file?: string): OutputSettings {
  const o = parseBySchema<Record<string, unknown>>("outputs", outputsSchema, recipe.outputs, file);
  const greyLow = o["grey-low"] as number | undefined;
  const greyHigh = o["grey-high"] as number | undefined;
  if (greyLow !== undefined && greyHigh !== undefined && !(greyHigh > greyLow))
    throw new UsageError(
      { file, field: "outputs.grey-high", value: greyHigh },
      `must be above grey-low, ${greyLow}`,
      "",
    );
  return {
    pictures: o.pictures as boolean,
    greyLow,
    greyHigh,
    pngBits: o["png-bits"] as 8 | 16,
    tileLimit: o["tile-limit"] as number,
  };
}

/**
 * Change a recipe by `stage.parameter=value`, `stage=off`, `stage=on`, and likewise `scan.key=value` and
 * `outputs.key=value`. A stage that is absent is inserted at its place in the flow; taking out an absent one does nothing.
 * @param flag  by which the setting was given, for the errors
 * @throws UsageError for an unknown stage or form, or a stage that occurs twice
 */
export function applySetting(recipe: Recipe, setting: string, flag = "--set"): Recipe {
  const match = /^([a-z0-9-]+)(?:\.([a-z0-9-]+))?=(.*)$/s.exec(setting);
  const form = "Write stage.parameter=value, or stage=off";
  if (!match)
    throw new UsageError({ field: flag, value: setting }, "must be of the form stage.parameter=value", form);
  const [, id, key, text] = match as unknown as [string, string, string | undefined, string];
  const value = settingValue(setting, text, flag);
  if ((id === "scan" || id === "outputs") && key !== undefined)
    return { ...recipe, [id]: { ...recipe[id], [key]: value } };
  const ids = STAGES.map((stage) => stage.id);
  if (!ids.includes(id)) throw unknownName(undefined, flag, id, [...ids, "scan", "outputs"]);
  if (recipe.stages.filter((stage) => stage.id === id).length > 1)
    throw new UsageError(
      { field: flag, value: setting },
      `the recipe has ${id} twice`,
      "Change the recipe file instead",
    );
  if (key !== undefined) return withStage(recipe, id, { [key]: value });
  if (text === "off") return { ...recipe, stages: recipe.stages.filter((stage) => stage.id !== id) };
  if (text === "on") return withStage(recipe, id, {});
  throw new UsageError({ field: flag, value: setting }, "a stage is switched on or off", form);
}

/** The recipe with a stage at its place in the flow; one that is there keeps its other parameters. */
export function withStage(recipe: Recipe, id: string, parameters: Record<string, unknown>): Recipe {
  const present = recipe.stages.find((stage) => stage.id === id);
  if (present) {
    const changed = { id, parameters: { ...present.parameters, ...parameters } };
    return { ...recipe, stages: recipe.stages.map((stage) => (stage === present ? changed : stage)) };
  }
  const place = (stageId: string) => STAGES.findIndex((stage) => stage.id === stageId);
  const at = recipe.stages.findIndex((stage) => place(stage.id) > place(id));
  const stages = [...recipe.stages];
  stages.splice(at < 0 ? stages.length : at, 0, { id, parameters });
  return { ...recipe, stages };
}

/** A value as YAML reads it, so that numbers, lists and maps come out as in a recipe. */
function settingValue(setting: string, text: string, flag: string): unknown {
  try {
    return parseYaml(text);
  } catch {
    throw new UsageError({ field: flag, value: setting }, "the value is not YAML", "Quote it");
  }
}

function unknownName(
  file: string | undefined,
  field: string,
  name: string,
  known: readonly string[],
): UsageError {
  const guess = nearest(name, known);
  const mend = guess ? `Did you mean ${guess}?` : `Known: ${known.join(", ")}`;
  return new UsageError({ file, field: `${field}: ${name}` }, "no such name", mend);
}

function isMap(value: unknown): value is Record<string, unknown> {
  return typeof value === "object" && value !== null && !Array.isArray(value);
}

function mapOf(value: unknown, file: string, field: string): Record<string, unknown> {
  if (value === undefined || value === null) return {};
  if (!isMap(value)) throw new UsageError({ file, field }, "must be a map of keys to values", "");
  return value;
}

/** Errors of a stage's own parse gain the file they came from. */
function inFile(file: string, parse: () => void): void {
  try {
    parse();
  } catch (error) {
    if (error instanceof UsageError && !error.place.file)
      throw new UsageError({ ...error.place, file }, error.rule, error.mend, { cause: error });
    throw error;
  }
}
