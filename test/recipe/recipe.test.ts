import { Ajv2020 } from "ajv/dist/2020.js";
import { describe, expect, test } from "vitest";
import { parse } from "yaml";
import {
  applySetting,
  formatRecipe,
  outputSettings,
  type Recipe,
  readRecipe,
  scanOverrides,
} from "../../src/recipe/recipe.js";
import { recipeSchema } from "../../src/recipe/schema.js";

const TEXT = `carillon: 1
scan: { duplicates: last, recentre-mm: [1, 2, 0] }
stages:
  - trim-oversampling
  - apodize: { window: tukey:0.5, shape: radial }
  - inverse-fft
  - fit-matrix
  - combine-coils
outputs: { grey-high: 400 }
`;
const recipe = readRecipe(TEXT, "my.yaml");
const ids = (of: Recipe) => of.stages.map(({ id }) => id);

test("a recipe comes back from its own text", () => {
  expect(readRecipe(formatRecipe(recipe), "again.yaml")).toEqual(recipe);
  expect(scanOverrides(recipe)).toMatchObject({
    duplicates: "last",
    recentreMm: [1, 2, 0],
    centre: "header",
  });
  expect(outputSettings(recipe)).toMatchObject({
    greyHigh: 400,
    greyLow: undefined,
    pngBits: 8,
    tileLimit: 64,
  });
});

describe("--set", () => {
  test("adds a stage in its place, changes one, takes one out", () => {
    const bare = { ...recipe, stages: recipe.stages.filter(({ id }) => id !== "apodize") };
    expect(ids(applySetting(bare, "apodize.window=hann"))).toEqual(ids(recipe));
    expect(applySetting(recipe, "apodize.window=hann").stages[1]).toEqual({
      id: "apodize",
      parameters: { window: "hann", shape: "radial" },
    });
    expect(ids(applySetting(recipe, "apodize=off"))).toEqual(ids(bare));
    expect(applySetting(bare, "apodize=off")).toEqual(bare);
    expect(ids(applySetting(bare, "prewhiten=on"))[1]).toBe("prewhiten");
    expect(applySetting(bare, "scan.centre=measured").scan).toMatchObject({ centre: "measured" });
  });

  test.each([
    ["apodise.window=hann", /apodise: no such name\. Did you mean apodize\?/],
    ["apodize", /must be of the form stage\.parameter=value/],
    ["apodize=maybe", /switched on or off/],
  ])("%s is refused", (setting, message) => {
    expect(() => applySetting(recipe, setting)).toThrow(message);
  });

  test("a stage that occurs twice cannot be set", () => {
    const twice = { ...recipe, stages: [...recipe.stages, recipe.stages[1]!] };
    expect(() => applySetting(twice, "apodize.window=hann")).toThrow(/has apodize twice/);
  });
});

/** What is wrong, and what the error says. */
const WRONG: [string, string, RegExp][] = [
  ["another major version", TEXT.replace("carillon: 1", "carillon: 2"), /carillon is 2; must be 1/],
  ["no version", TEXT.replace("carillon: 1\n", ""), /carillon is null; must be 1/],
  ["an unknown top key", `${TEXT}output: {}\n`, /output: no such name\. Did you mean outputs\?/],
  [
    "an unknown stage",
    TEXT.replace("fit-matrix", "fit-matrx"),
    /fit-matrx: no such name\. Did you mean fit-matrix\?/,
  ],
  [
    "an unknown parameter",
    TEXT.replace("shape:", "shap:"),
    /apodize\.shap: unknown key\. Did you mean shape\?/,
  ],
  [
    "an unknown scan key",
    TEXT.replace("duplicates", "duplicate"),
    /scan\.duplicate: unknown key\. Did you mean duplicates\?/,
  ],
  ["a wrong value", TEXT.replace("last", "first"), /scan\.duplicates is first; must be one of mean, last/],
  ["a wrong window", TEXT.replace("tukey:0.5", "tuckey"), /apodize\.window/],
  ["no stages", "carillon: 1\n", /stages: must be a list/],
  ["no YAML", "carillon: [1", /is not YAML/],
];

test.each(WRONG)("%s is an error that names file and place", (_, text, message) => {
  expect(() => readRecipe(text, "my.yaml")).toThrow(message);
  expect(() => readRecipe(text, "my.yaml")).toThrow(/^my\.yaml: /);
});

test("the published JSON Schema accepts and refuses what the reader does", () => {
  const validate = new Ajv2020({ strictTypes: false, allowUnionTypes: true }).compile(recipeSchema());
  expect(validate(parse(TEXT))).toBe(true);
  for (const [name, text] of WRONG) {
    if (name === "no YAML" || name === "a wrong window") continue; // what a schema cannot see
    expect(validate(parse(text)), name).toBe(false);
  }
});
