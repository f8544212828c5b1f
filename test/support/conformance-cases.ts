import { spawnSync } from "node:child_process";
import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, expect } from "vitest";
import { readNpy } from "../../src/writers/npy.js";

/** Answers made by another program: scripts/conformance/make_conformance.py (NumPy, h5py), none of this project's code. */
export const COMMITTED = "data/conformance";
const PYTHON = "/usr/bin/python3";
export const hasH5py = spawnSync(PYTHON, ["-c", "import h5py, numpy"]).status === 0;

/** A folder in which, before the tests of the block, some cases are made with another seed: other anatomy and noise. */
export function otherSeed(names: readonly string[], seed = 7): string {
  const folder = mkdtempSync(path.join(tmpdir(), "carillon-seed-"));
  beforeAll(() => {
    const script = [
      "scripts/conformance/make_conformance.py",
      folder,
      "--seed",
      `${seed}`,
      "--only",
      ...names,
    ];
    expect(spawnSync(PYTHON, script).status).toBe(0);
  });
  afterAll(() => rmSync(folder, { recursive: true }));
  return folder;
}

/** One answer of a case, real. */
export function answer(folder: string, name: string, what: string): Float32Array {
  return Float32Array.from(readNpy(path.join(folder, `${name}.${what}.npy`)).data as Float32Array);
}

/** 1 above 20 % of the maximum. */
export function objectOf(truth: Float32Array): Uint8Array {
  const floor = 0.2 * truth.reduce((most, value) => Math.max(most, value), 0);
  return Uint8Array.from(truth, (value) => (value > floor ? 1 : 0));
}

/** Relative L2 difference over the object, without fitting a scale. */
export function objectDifference(found: ArrayLike<number>, truth: Float32Array): number {
  let [difference, norm] = [0, 0];
  objectOf(truth).forEach((inside, i) => {
    if (!inside) return;
    difference += (found[i]! - truth[i]!) ** 2;
    norm += truth[i]! ** 2;
  });
  return found.length === truth.length ? Math.sqrt(difference / norm) : Number.NaN;
}

/** The real values of a result: magnitudes of a complex one. */
export function magnitudes(data: Float32Array, kind: "complex" | "real"): Float32Array {
  if (kind === "real") return data;
  return Float32Array.from({ length: data.length / 2 }, (_, i) => Math.hypot(data[2 * i]!, data[2 * i + 1]!));
}
