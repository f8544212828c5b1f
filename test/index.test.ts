import { expect, test } from "vitest";
import * as carillon from "../src/index.js";

test("what the library exports is what others build on: a change here is a change for them", () => {
  expect(Object.keys(carillon).sort()).toEqual([
    "CAUTION",
    "CarillonError",
    "InputError",
    "OutputError",
    "UsageError",
    "VERSION",
    "applySetting",
    "budgetPoint",
    "continuousWindow",
    "defaultRecipe",
    "echoBudgets",
    "formatRecipe",
    "outputSettings",
    "parseWindow",
    "planRecipe",
    "pointSpread",
    "readNpy",
    "readRecipe",
    "readScan",
    "readoutBudget",
    "readoutFacts",
    "recipeSchema",
    "reconstructVariants",
    "run",
    "sampledWindow",
    "scanOverrides",
    "simulateRaw",
    "windowFigures",
    "windowValues",
    "withShortcuts",
    "writeComparison",
    "writeReconstruction",
  ]);
});
