import { createHash } from "node:crypto";
import { readFileSync } from "node:fs";
import { InputError } from "../errors.js";
import type { InputArray, InputArrays } from "../stages/stage.js";
import { readNpy } from "../writers/npy.js";

/**
 * Read the arrays that a recipe names.
 * @throws InputError for a file that cannot be read or does not hold finite real numbers
 */
export function readArrays(files: readonly string[]): InputArrays {
  return new Map(files.map((file) => [file, readArray(file)]));
}

function readArray(file: string): InputArray {
  const { shape, data, dtype } = readNpy(file);
  if (dtype === "<c8" || dtype === "<c16")
    throw new InputError(
      { file, field: "element type", value: dtype },
      "must hold real numbers",
      "Save the real part, or what is meant",
    );
  const real = data instanceof Float32Array ? data : Float64Array.from(data as ArrayLike<number>, Number);
  const bad = real.findIndex((value) => !Number.isFinite(value));
  if (bad >= 0)
    throw new InputError(
      { file, field: `element ${bad}`, value: String(real[bad]) },
      "must be a finite number",
      "Fill what is unknown before saving: numpy.nan_to_num",
    );
  return { file, shape, data: real, sha256: createHash("sha256").update(readFileSync(file)).digest("hex") };
}
