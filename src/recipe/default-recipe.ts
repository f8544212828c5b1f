import { InputError } from "../errors.js";
import type { ScanFacts } from "../physics/scan.js";
import { trimmedLength } from "../stages/trim-oversampling.js";
import type { Recipe } from "./recipe.js";
import { RECIPE_VERSION } from "./schema.js";

const SUPPORTED = ["cartesian"];

/**
 * Any recipe would make a wrong image of readouts that do not lie on straight, parallel lines.
 * @throws InputError for a trajectory that is not supported
 */
export function refuseUnsupported(scan: ScanFacts, file?: string): void {
  if (!SUPPORTED.includes(scan.trajectory))
    throw new InputError(
      { file, field: "header: trajectory", value: scan.trajectory },
      `only ${SUPPORTED.join(", ")} is supported so far`,
      "Inspect the file with: carillon inspect RAW",
    );
}

/**
 * The recipe for what a scan is, without a window, and why each stage is in it.
 * @throws InputError for a trajectory that is not supported
 */
export function defaultRecipe(
  scan: ScanFacts,
  file: string,
): { recipe: Recipe; reasons: Map<string, string> } {
  refuseUnsupported(scan, file);
  const reasons = new Map<string, string>();
  const kept = trimmedLength(scan);
  if (kept < scan.encoded.matrix.x)
    reasons.set(
      "trim-oversampling",
      `the readout is oversampled: ${scan.encoded.matrix.x} samples for ${kept} pixels`,
    );
  if (scan.noise) reasons.set("prewhiten", `the file has ${scan.noise.readouts} noise readouts`);
  reasons.set("inverse-fft", "straight, evenly spaced lines");
  reasons.set("fit-matrix", "to the reconstructed field of view and matrix");
  reasons.set(
    "combine-coils",
    scan.channels === 1 ? "one channel: passed on, complex" : `${scan.channels} channels`,
  );
  const stages = [...reasons.keys()].map((id) => ({ id, parameters: {} }));
  return { recipe: { carillon: RECIPE_VERSION, scan: {}, stages, outputs: {} }, reasons };
}
