import { describe, expect, test } from "vitest";
import { resolveAcquisition } from "../../src/simulate/acquisition.js";
import { sliceGeometry } from "../../src/simulate/geometry.js";

type Vector = readonly [number, number, number];
const dot = (a: Vector, b: Vector) => a[0] * b[0] + a[1] * b[1] + a[2] * b[2];
const expectVector = (found: Vector, expected: Vector) => {
  for (const i of [0, 1, 2] as const) expect(found[i]).toBeCloseTo(expected[i], 12); // a few products of cosines
};

test("without rotation the directions are the patient's axes and the stack is centred", () => {
  const a = resolveAcquisition({ slices: 4, sliceSpacingMm: 7, positionMm: [1, 2, 3] });
  const { positionMm, readDir, phaseDir, sliceDir } = sliceGeometry(a, 0);
  expectVector(readDir, [1, 0, 0]);
  expectVector(phaseDir, [0, 1, 0]);
  expectVector(sliceDir, [0, 0, 1]);
  expectVector(positionMm, [1, 2, 3 - 10.5]);
  expectVector(sliceGeometry(a, 3).positionMm, [1, 2, 3 + 10.5]);
});

describe("a quarter turn", () => {
  // right-handed turns about fixed axes: x takes y to z, y takes z to x, z takes x to y
  test.each([
    { degrees: [90, 0, 0], read: [1, 0, 0], phase: [0, 0, 1], slice: [0, -1, 0] },
    { degrees: [0, 90, 0], read: [0, 0, -1], phase: [0, 1, 0], slice: [1, 0, 0] },
    { degrees: [0, 0, 90], read: [0, 1, 0], phase: [-1, 0, 0], slice: [0, 0, 1] },
    { degrees: [90, 90, 0], read: [0, 0, -1], phase: [1, 0, 0], slice: [0, -1, 0] }, // x first: the order matters
  ] as const)("of $degrees", ({ degrees, read, phase, slice }) => {
    const geometry = sliceGeometry(resolveAcquisition({ rotationDegrees: degrees }), 0);
    expectVector(geometry.readDir, read);
    expectVector(geometry.phaseDir, phase);
    expectVector(geometry.sliceDir, slice);
  });
});

test("oblique directions stay orthonormal and right-handed, and positions step along slice_dir", () => {
  const a = resolveAcquisition({
    slices: 3,
    sliceSpacingMm: 9,
    rotationDegrees: [12, -34, 56],
    positionMm: [5, 6, 7],
  });
  const { readDir: r, phaseDir: p, sliceDir: s, positionMm } = sliceGeometry(a, 1);
  for (const [u, v, product] of [
    [r, r, 1],
    [p, p, 1],
    [r, p, 0],
    [r, s, 0],
    [p, s, 0],
  ] as const)
    expect(dot(u, v)).toBeCloseTo(product, 12);
  const cross: Vector = [r[1] * p[2] - r[2] * p[1], r[2] * p[0] - r[0] * p[2], r[0] * p[1] - r[1] * p[0]];
  expectVector(cross, s);
  expectVector(positionMm, [5, 6, 7]);
  const next = sliceGeometry(a, 2).positionMm;
  expectVector([next[0] - 5, next[1] - 6, next[2] - 7], [9 * s[0], 9 * s[1], 9 * s[2]]);
});
