import { describe, expect, it } from "vitest";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { planUndisplace } from "../../src/kernels/undisplace.js";
import { planUndisplaceColumns } from "../../src/kernels/undisplace-columns.js";
import { seededSamples } from "./reference-transform.js";

const engine = createPlainEngine();
const [COLUMNS, INPUT, OUTPUT] = [5, 12, 9];

function swap(map: ArrayLike<number>, rows: number, columns: number, floats: number): Float32Array {
  return Float32Array.from({ length: map.length }, (_, i) => {
    const [part, p] = [i % floats, Math.floor(i / floats)];
    return map[floats * ((p % rows) * columns + Math.floor(p / rows)) + part]!;
  });
}

describe("planUndisplaceColumns", () => {
  it.each([false, true])("is the row version on turned images and maps (accrued phase: %s)", (withPhase) => {
    const image = seededSamples(2 * INPUT * COLUMNS + 2).subarray(2);
    const displacementPixels = seededSamples(OUTPUT * COLUMNS, 4).map((value) => 0.6 * value);
    const fieldHz = displacementPixels.map((value) => 20 * value);
    const accrued = withPhase ? { accrued: { fieldHz, echoSeconds: 0.004 } } : {};
    const plan = planUndisplaceColumns(COLUMNS, INPUT, { displacementPixels, jacobian: true, ...accrued });
    const out = new Float32Array(2 * OUTPUT * COLUMNS);
    plan.apply(engine, image, out);

    const turn = (map: Float32Array) => swap(map, OUTPUT, COLUMNS, 1);
    const turnedPhase = withPhase ? { accrued: { fieldHz: turn(fieldHz), echoSeconds: 0.004 } } : {};
    const rows = planUndisplace(COLUMNS, INPUT, {
      displacementPixels: turn(displacementPixels),
      jacobian: true,
      ...turnedPhase,
    });
    const expected = new Float32Array(out.length);
    rows.apply(engine, swap(image, INPUT, COLUMNS, 2), expected);
    expect(out).toEqual(swap(expected, COLUMNS, OUTPUT, 2));
    expect([...plan.folded]).toEqual([...swap(rows.folded, COLUMNS, OUTPUT, 1)]);
    expect(out.some((value) => value !== 0)).toBe(true);
  });

  it("moves along y: a spin with df at 1 / (64 x .5 ms) per pixel is found where it was", () => {
    // 31.25 Hz per pixel [computed with NumPy: S8]; 125 Hz puts the bright row 4 pixels further
    const image = new Float32Array(2 * 16 * 3);
    for (let x = 0; x < 3; x++) image[2 * (10 * 3 + x)] = 1;
    const displacementPixels = new Float32Array(16 * 3).fill(125 / 31.25);
    const out = new Float32Array(image.length);
    planUndisplaceColumns(3, 16, { displacementPixels, jacobian: true }).apply(engine, image, out);
    for (let x = 0; x < 3; x++) expect(out[2 * (6 * 3 + x)]).toBeCloseTo(1, 4); // the kernel's error, 2e-5
  });
});
