import { describe, expect, it } from "vitest";
import {
  cubicAt,
  foldedPixels,
  objectField,
  resampleMap,
  stretchFactors,
} from "../../src/kernels/displacement.js";

const ramp = (rows: number, length: number, slope: number) =>
  Float32Array.from({ length: rows * length }, (_, i) => slope * ((i % length) - Math.floor(length / 2)));

describe("stretchFactors", () => {
  // computed with NumPy (S8): slopes in Hz per pixel over the bandwidth per pixel
  it.each([
    [20, 390.625, 1.0512],
    [-20, 390.625, 0.9488],
    [5, 31.25, 1 / 0.862069],
    [-5, 31.25, 1 / 1.190476],
  ])("a slope of %f Hz per pixel at %f Hz stretches by %f", (slopeHz, bandwidthHz, expected) => {
    for (const factor of stretchFactors(ramp(3, 7, slopeHz / bandwidthHz), 3, 7)) {
      expect(factor).toBeCloseTo(expected, 5); // the table's six digits
    }
  });
});

describe("foldedPixels", () => {
  it("finds a slope of one pixel per pixel singular [computed with NumPy: S8]", () => {
    expect([...foldedPixels(ramp(1, 5, -31.25 / 31.25), 1, 5)]).toEqual([1, 1, 1, 1, 1]);
    expect([...foldedPixels(ramp(2, 5, -0.99), 2, 5)]).toEqual(new Array(10).fill(0));
  });

  it("takes in every pixel that shares its place, not only the turned ones", () => {
    // places 0 1 2 6 4 3 6.5 8: from 3 to 6 the order is lost; 2 and 6.5 lie on either side of it
    const displacement = Float32Array.from([0, 0, 0, 3, 0, -2, 0.5, 1]);
    expect([...foldedPixels(displacement, 1, 8)]).toEqual([0, 0, 0, 1, 1, 1, 0, 0]);
  });
});

describe("objectField", () => {
  it.each([200, -200])("inverts a straight field at %i Hz per pixel", (bandwidthHz) => {
    // f(x) = s x is seen as s x' / (1 + s / B)
    const [slope, length] = [10, 41];
    const image = ramp(2, length, slope / (1 + slope / bandwidthHz));
    const { fieldHz, places } = objectField(image, 2, length, bandwidthHz);
    for (let i = 0; i < fieldHz.length; i++) {
      const x = (i % length) - 20;
      if (Math.abs(x) > 18) continue; // the field is not continued beyond the grid
      expect(fieldHz[i]).toBeCloseTo(slope * x, 3); // float32 of numbers up to 200
      expect(places[i]).toBeCloseTo(x + 20 + (slope * x) / bandwidthHz, 4);
    }
  });

  it("leaves a field alone where nothing is displaced", () => {
    const image = Float32Array.from({ length: 30 }, (_, i) => Math.sin(i));
    expect(objectField(image, 3, 10, Number.POSITIVE_INFINITY).fieldHz).toEqual(image);
  });
});

describe("resampleMap", () => {
  it("reproduces a surface of second degree on a finer grid, inside", () => {
    const surface = (y: number, x: number) => 3 - x + 0.5 * y + 0.2 * x * x - 0.1 * x * y;
    const map = Float32Array.from({ length: 9 * 10 }, (_, i) =>
      surface(Math.floor(i / 10) - 4, (i % 10) - 5),
    );
    const fine = resampleMap(map, 9, 10, 15, 16);
    for (let y = 3; y < 12; y++) {
      for (let x = 3; x < 13; x++) {
        const expected = surface(((y - 7) * 9) / 15, ((x - 8) * 10) / 16);
        expect(fine[y * 16 + x]).toBeCloseTo(expected, 5); // float32
      }
    }
  });

  it("returns the samples themselves at whole places", () => {
    const line = [1, 4, 2, 8, 5];
    expect(line.map((_, i) => cubicAt(line, i))).toEqual(line);
    expect(cubicAt([7], 3)).toBe(7);
  });
});
