import { type Recipe, withStage } from "./recipe.js";

/** What single flags of the command line add to a recipe. */
export interface Shortcuts {
  /** `measured`, or the file of a field map in Hz. */
  readonly undisplace?: string;
  readonly fieldCoordinates?: "object" | "image";
  readonly separate?: "fat-water";
}

/**
 * Insert the stages that the shortcuts stand for at their places. Both need the readout's margin: what was displaced
 * beyond the field of view comes back from it.
 */
export function withShortcuts(recipe: Recipe, { undisplace, fieldCoordinates, separate }: Shortcuts): Recipe {
  if (undisplace === undefined && separate === undefined) return recipe;
  let changed = withStage(without(recipe, "trim-oversampling"), "fit-matrix", { "readout-margin": "keep" });
  // undisplace takes the margin off itself; where it is switched off, something else must.
  changed = withStage(changed, "trim-margin", {});
  if (separate) changed = withStage(changed, "separate-fat-water", {});
  if (undisplace === undefined) return changed;
  // The separation finds the field as well, and better where there is fat.
  if (undisplace === "measured" && !separate) changed = withStage(changed, "field-map", {});
  const coordinates = fieldCoordinates === undefined ? {} : { coordinates: fieldCoordinates };
  return withStage(changed, "undisplace", { field: undisplace, ...coordinates });
}

/** The recipe with a stage that makes a field map: `field-map`, unless it has one. */
export function withField(recipe: Recipe): Recipe {
  const hasField = recipe.stages.some(({ id }) => id === "separate-fat-water");
  return hasField ? recipe : withStage(recipe, "field-map", {});
}

function without(recipe: Recipe, id: string): Recipe {
  return { ...recipe, stages: recipe.stages.filter((stage) => stage.id !== id) };
}
