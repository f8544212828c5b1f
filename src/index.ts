/**
 * Carillon as a library: everything that a command does, a script can do. Asynchronous, typed, and without `process`.
 * For research only, not for diagnosis or treatment.
 */

export {
  type Compared,
  type CompareOptions,
  reconstructVariants,
  type Variant,
  type VariantImages,
} from "./engine/compare.js";
export type { Placement, Spread } from "./engine/placement.js";
export { type Plan, type PlannedStage, planRecipe } from "./engine/plan.js";
export type { Save } from "./engine/products.js";
export { type ReadoutFacts, readoutFacts } from "./engine/readout-facts.js";
export type { GroupResult } from "./engine/reconstruct.js";
export { type Attempt, type PlannedRecipe, type RunOptions, type RunResult, run } from "./engine/run.js";
export { type ReadOptions, readScan, type Scan } from "./engine/scan.js";
export { CAUTION } from "./engine/sidecar.js";
export {
  type ComparisonOptions,
  type WrittenComparison,
  writeComparison,
} from "./engine/write-comparison.js";
export {
  type WriteOptions,
  type WrittenReconstruction,
  writeReconstruction,
} from "./engine/write-reconstruction.js";
export { CarillonError, InputError, OutputError, UsageError } from "./errors.js";
export type { Kernels } from "./kernels/kernels.js";
export {
  type AxisWindow,
  continuousWindow,
  pointSpread,
  sampledWindow,
  type WindowFigures,
  windowFigures,
} from "./kernels/point-spread.js";
export { parseWindow, type WindowSpec, windowValues } from "./kernels/window.js";
export { type EchoBudget, echoBudgets, type PlannedEcho } from "./physics/echo-budget.js";
export type { Axis, FrameAxis, SpatialAxis, Xyz } from "./physics/layout.js";
export {
  type Budget,
  type BudgetPoint,
  type BudgetQuestions,
  budgetPoint,
  type ReadoutPlan,
  readoutBudget,
} from "./physics/readout-budget.js";
export type { Discrepancy, Pose, ScanFacts, ScanOverrides, Space } from "./physics/scan.js";
export { defaultRecipe } from "./recipe/default-recipe.js";
export {
  applySetting,
  formatRecipe,
  type OutputSettings,
  outputSettings,
  type Recipe,
  readRecipe,
  scanOverrides,
} from "./recipe/recipe.js";
export { recipeSchema } from "./recipe/schema.js";
export { type Shortcuts, withShortcuts } from "./recipe/shortcuts.js";
export { type SimulateOptions, simulateRaw } from "./simulate/index.js";
export type { Frame, FrameStage, Layout, ReadoutStage, Stage } from "./stages/stage.js";
export { VERSION } from "./version.js";
export { readNpy } from "./writers/npy.js";
