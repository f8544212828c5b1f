import { apodize } from "./apodize.js";
import { combineCoils } from "./combine-coils.js";
import { fieldMap } from "./field-map.js";
import { fitMatrix } from "./fit-matrix.js";
import { inverseFft } from "./inverse-fft.js";
import { prewhiten } from "./prewhiten.js";
import { separateFatWaterStage } from "./separate-fat-water.js";
import { shiftReadout } from "./shift-readout.js";
import type { Stage } from "./stage.js";
import { trimMargin } from "./trim-margin.js";
import { trimOversampling } from "./trim-oversampling.js";
import { undisplace } from "./undisplace.js";

/**
 * Every stage, in the order of the flow; a recipe lists some of them in this order. Types, help, JSON Schema and the
 * place where `--set` inserts a stage derive from this list.
 */
export const STAGES: readonly Stage[] = [
  shiftReadout,
  trimOversampling,
  prewhiten,
  apodize,
  inverseFft,
  fitMatrix,
  fieldMap,
  separateFatWaterStage,
  undisplace,
  trimMargin,
  combineCoils,
] as unknown as readonly Stage[]; // each stage gets only what its own `parse` returned

export function stageById(id: string): Stage | undefined {
  return STAGES.find((stage) => stage.id === id);
}
