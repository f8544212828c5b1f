import { describe, expect, test } from "vitest";
import { addEllipseSpectrum, type Ellipse, intensityAt } from "../../src/simulate/ellipse.js";
import { phantomSlice } from "../../src/simulate/phantom.js";

function spectrumAt(ellipses: readonly Ellipse[], kx: number, ky: number): [number, number] {
  const result = new Float64Array(2);
  addEllipseSpectrum(ellipses, Float64Array.of(kx), ky, result);
  return [result[0] ?? Number.NaN, result[1] ?? Number.NaN];
}

describe("Shepp-Logan", () => {
  const published = phantomSlice("shepp-logan", 0).water;
  const modified = phantomSlice("shepp-logan-modified", 0).water;

  // computed with SciPy from the published table, 10 decimals; cycles per half field of view
  test.each([
    [0, 0, 2.2017566919, 0, 0.4952646048, 0],
    [1, 0, -0.2289571552, -0.0014082412, -0.0754758323, -0.0140824115],
    [0, 1, -0.2162686032, 0.0245881437, -0.0733490636, 0.0107630559],
    [3, 2, -0.0640814601, 0.0012643191, -0.0318698404, -0.0012736932],
    [10, -7, 0.0157067566, -0.0030687524, 0.0090558339, -0.0030990234],
  ])("k-space at (%s, %s)", (kx, ky, re, im, reModified, imModified) => {
    const tolerance = 6e-11; // half a unit of the last digit, and a little
    const [a, b] = spectrumAt(published, kx, ky);
    const [c, d] = spectrumAt(modified, kx, ky);
    for (const difference of [a - re, b - im, c - reModified, d - imModified])
      expect(Math.abs(difference)).toBeLessThan(tolerance);
  });

  // computed from the published table: point, intensity of 1974, of higher contrast
  test.each([
    ["skull", 0, 0.9, 2, 1],
    ["brain", 0.4, -0.4, 1.02, 0.2],
    ["right ventricle", 0.22, 0, 1, 0],
    ["left ventricle", -0.22, 0, 1, 0],
    ["ellipse e", 0, 0.45, 1.03, 0.3],
    ["ellipses e and f", 0, 0.12, 1.04, 0.4],
    ["ellipse g", 0, -0.1, 1.03, 0.3],
    ["ellipse h", -0.08, -0.605, 1.03, 0.3],
  ])("%s", (_name, x, y, value, valueModified) => {
    expect(intensityAt(published, x, y)).toBeCloseTo(value, 12); // sums of a few decimal fractions
    expect(intensityAt(modified, x, y)).toBeCloseTo(valueModified, 12);
  });
});

describe.each([-0.8, -0.1, 0, 0.1, 0.8])("belfry at the height %s", (height) => {
  const { water, fat } = phantomSlice("belfry", height);
  const grid = Array.from({ length: 101 }, (_, i) => (i - 50) / 50);
  const points = grid.flatMap((y) =>
    grid.map((x) => ({ w: intensityAt(water, x, y), f: intensityAt(fat, x, y), x, y })),
  );

  test("has no negative signal, and oil and water never in one place", () => {
    for (const { w, f } of points) {
      expect(w).toBeGreaterThan(-1e-12); // gel minus displaced gel: 0 to rounding
      if (f > 0) expect(w).toBeCloseTo(0, 12);
    }
  });

  test("fits into its square", () => {
    for (const { w, f, x, y } of points) if (Math.max(Math.abs(x), Math.abs(y)) === 1) expect(w + f).toBe(0);
  });

  test("has no symmetry: every flip and turn changes many points", () => {
    const total = (x: number, y: number) => intensityAt(water, x, y) + intensityAt(fat, x, y);
    const images: ((x: number, y: number) => number)[] = [
      (x, y) => total(-x, y),
      (x, y) => total(x, -y),
      (x, y) => total(-x, -y),
      (x, y) => total(y, x),
      (x, y) => total(-y, x),
    ];
    for (const image of images) {
      const changed = points.filter(({ x, y }) => Math.abs(image(x, y) - total(x, y)) > 0.1).length;
      expect(changed / points.length).toBeGreaterThan(0.01); // a vial alone covers 0.4 % of the square
    }
  });
});

test("belfry widens from crown to mouth", () => {
  const radius = (height: number) => phantomSlice("belfry", height).water[0]?.a ?? Number.NaN;
  expect(radius(-0.5)).toBeGreaterThan(radius(0));
  expect(radius(0)).toBeGreaterThan(radius(0.5));
});
