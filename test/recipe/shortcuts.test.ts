import { describe, expect, test } from "vitest";
import { applySetting, type Recipe } from "../../src/recipe/recipe.js";
import { withField, withShortcuts } from "../../src/recipe/shortcuts.js";

const PLAIN: Recipe = {
  carillon: 1,
  scan: {},
  stages: ["trim-oversampling", "prewhiten", "inverse-fft", "fit-matrix", "combine-coils"].map((id) => ({
    id,
    parameters: {},
  })),
  outputs: {},
};
const ids = ({ stages }: Recipe) => stages.map(({ id }) => id);
const parametersOf = ({ stages }: Recipe, id: string) => stages.find((stage) => stage.id === id)?.parameters;

describe("shortcuts put stages in their place, and keep the readout's margin for them", () => {
  test("undisplace measured", () => {
    const recipe = withShortcuts(PLAIN, { undisplace: "measured" });
    expect(ids(recipe)).toEqual([
      "prewhiten",
      "inverse-fft",
      "fit-matrix",
      "field-map",
      "undisplace",
      "trim-margin",
      "combine-coils",
    ]);
    expect(parametersOf(recipe, "fit-matrix")).toEqual({ "readout-margin": "keep" });
    expect(ids(applySetting(recipe, "undisplace=off"))).toContain("trim-margin");
  });

  test("with fat and water the field is that of the separation", () => {
    const recipe = withShortcuts(PLAIN, { undisplace: "measured", separate: "fat-water" });
    expect(ids(recipe)).not.toContain("field-map");
    expect(ids(recipe).slice(3)).toEqual([
      "separate-fat-water",
      "undisplace",
      "trim-margin",
      "combine-coils",
    ]);
  });

  test("a given map, its coordinates, and nothing that measures", () => {
    const recipe = withShortcuts(PLAIN, { undisplace: "f.npy", fieldCoordinates: "image" });
    expect(ids(recipe)).not.toContain("field-map");
    expect(parametersOf(recipe, "undisplace")).toEqual({ field: "f.npy", coordinates: "image" });
  });

  test("without any, the recipe itself; a field where one is wanted, once", () => {
    expect(withShortcuts(PLAIN, {})).toBe(PLAIN);
    expect(ids(withField(PLAIN))).toContain("field-map");
    const separated = withShortcuts(PLAIN, { separate: "fat-water" });
    expect(withField(separated)).toBe(separated);
  });
});
