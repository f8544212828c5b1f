import { writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { edgeAt, edgeFigures, edgeProfile } from "../../src/kernels/edge-profile.js";
import { createPlainKernels } from "../../src/kernels/plain-kernels.js";
import { continuousWindow, windowFigures } from "../../src/kernels/point-spread.js";
import { parseWindow } from "../../src/kernels/window.js";
import { simulateRaw } from "../../src/simulate/index.js";
import { apodize } from "../../src/stages/apodize.js";
import type { Frame, InputArray, Layout, StageContext } from "../../src/stages/stage.js";
import { npyBytes } from "../../src/writers/npy.js";
import { seededNormal } from "../kernels/seeded-normal.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("windows");
const at = (name: string) => path.join(folder, name);
const WINDOWS = [
  "none",
  "hann",
  "hamming",
  "blackman",
  "welch",
  "lanczos",
  "tukey:0.5",
  "gaussian:0.4",
  "kaiser:6",
  "fermi:0.9:0.05",
];
const SIZE = 96;
const COILS = 4;
const LAYOUT: Layout = {
  axes: ["coil", "z", "y", "x"],
  shape: [COILS, 1, SIZE, SIZE],
  kind: "complex",
  fovMm: { x: 240, y: 240, z: 5 },
  inImage: ["z"],
  acquired: { x: { first: 0, last: SIZE - 1 }, y: { first: 0, last: SIZE - 1 }, z: { first: 0, last: 0 } },
};

const context = (arrays: ReadonlyMap<string, InputArray> = new Map()): StageContext => ({
  // the stage asks nothing of the scan
  scan: undefined as unknown as StageContext["scan"],
  kernels: createPlainKernels(),
  counters: { repetition: 0, set: 0, phase: 0, contrast: 0, slice: 0 },
  arrays,
  allocate: (floats) => new Float32Array(floats),
  release: () => undefined,
  emit: () => undefined,
  emitted: () => undefined,
  note: () => undefined,
});

function apply(
  params: Record<string, unknown>,
  data: Float32Array,
  layout = LAYOUT,
  arrays?: ReadonlyMap<string, InputArray>,
): Frame {
  const frame: Frame = { data, layout, sampling: undefined, noise: { whitened: true, gain: 1 } };
  return apodize.run(frame, apodize.parse(params), context(arrays));
}

describe("noise alone", () => {
  const normal = seededNormal(11);
  const noise = Float32Array.from({ length: 2 * COILS * SIZE * SIZE }, () => normal());

  test.each(WINDOWS.flatMap((window) => [[window, "separable"] as const, [window, "radial"] as const]))(
    "%s, %s: the measured noise factor lies within its 99 %% interval about the stated one",
    (window, shape) => {
      const done = apply({ window, shape }, noise.slice());
      const stated = done.noise.gain;
      let [energy, fourth, gains] = [0, 0, 0];
      const ones = apply({ window, shape }, new Float32Array(noise.length).fill(1)).data;
      for (let i = 0; i < noise.length; i++) {
        energy += done.data[i]! ** 2;
        gains += ones[i]! ** 2;
        fourth += ones[i]! ** 4;
      }
      // The unitary transform keeps the energy, sum w^2 n^2, n^2 with mean 1 and variance 2: of its sum, 2 sum w^4.
      const measured = Math.sqrt(energy / noise.length);
      const deviation = Math.sqrt(2 * fourth) / gains / 2; // of the root, relative
      expect(Math.abs(measured / stated - 1)).toBeLessThan(2.576 * deviation);
    },
  );
});

describe("a simulated edge and a point", () => {
  beforeAll(() =>
    simulateRaw({
      file: at("disc.h5"),
      phantom: "disc",
      matrix: { x: 192, y: 192 },
      fovMm: { x: 240, y: 240 },
      coils: 1,
      slices: 1,
      fatSpectrum: [],
      noise: { sigma: 0 },
    }),
  );

  test.each(WINDOWS)(
    "%s: width and overshoot of the disc's edge are those of theory, to 2 %%",
    async (window) => {
      const { result } = await reconstructed(at("disc.h5"), [`apodize.window=${window}`]);
      const magnitude = Float32Array.from({ length: 192 * 192 }, (_, i) =>
        Math.hypot(result[2 * i]!, result[2 * i + 1]!),
      );
      const image = { data: magnitude, height: 192, width: 192, channels: result };
      // the rim on the left of the centre row
      let rim = 96;
      while (magnitude[96 * 192 + rim]! > magnitude[96 * 192 + 96]! / 2) rim--;
      const edge = edgeAt(image, "x", 96, rim, { sideLines: 4 })!;
      const found = edgeFigures(edgeProfile(image, edge, { sideLines: 4 }));
      const theory = windowFigures(continuousWindow(parseWindow(window)));
      expect(Math.abs(found.fwhmPixels / theory.lineFwhmPixels - 1)).toBeLessThan(0.02);
      // 2 % of the edge without a window's overshoot, 0.0895: a share of one that hardly rings would be of nothing
      expect(Math.abs(found.overshoot - theory.edgeOvershoot)).toBeLessThan(0.02 * 0.0895);
    },
  );

  test.each(WINDOWS)("%s: a point is as wide as theory says, to 2 %%", (window) => {
    // A point is all ones in k-space; its spread along x, with the window's mean along y, on a tenfold finer grid.
    const done = apply({ window, axes: ["x"] }, pointData());
    const line = done.data.subarray(0, 2 * SIZE);
    const spread = (x: number) => {
      let [re, im] = [0, 0];
      for (let k = 0; k < SIZE; k++) {
        const angle = (2 * Math.PI * (k - SIZE / 2) * x) / SIZE;
        re += line[2 * k]! * Math.cos(angle) - line[2 * k + 1]! * Math.sin(angle);
        im += line[2 * k]! * Math.sin(angle) + line[2 * k + 1]! * Math.cos(angle);
      }
      return Math.hypot(re, im);
    };
    let [low, high] = [0, 3];
    for (let i = 0; i < 40; i++) {
      const middle = (low + high) / 2;
      if (spread(middle) > spread(0) / 2) low = middle;
      else high = middle;
    }
    const theory = windowFigures(continuousWindow(parseWindow(window)));
    expect(Math.abs((low + high) / theory.pointFwhmPixels - 1)).toBeLessThan(0.02);
  });
});

function pointData(): Float32Array {
  return Float32Array.from({ length: 2 * COILS * SIZE * SIZE }, (_, i) => (i % 2 ? 0 : 1));
}

describe("a window of one's own, and shapes", () => {
  test("an array of the built-in gains gives what the built-in gives", async () => {
    const hann = Float64Array.from(
      { length: 192 },
      (_, i) => 0.5 + 0.5 * Math.cos((Math.PI * (i - 96)) / 96),
    );
    writeFileSync(at("own.npy"), npyBytes("<f8", [192], hann));
    const own = await reconstructed(at("disc.h5"), [`apodize.window=${at("own.npy")}`]);
    const named = await reconstructed(at("disc.h5"), ["apodize.window=hann"]);
    expect(relativeDifference(own.result, named.result)).toBeLessThan(1e-6);
    expect(own.noise.gain).toBeCloseTo(named.noise.gain, 6);
  });

  test("one that does not fit, or changes the level, is refused", async () => {
    writeFileSync(at("short.npy"), npyBytes("<f8", [5], new Float64Array(5).fill(1)));
    writeFileSync(at("half.npy"), npyBytes("<f8", [192], new Float64Array(192).fill(0.5)));
    await expect(reconstructed(at("disc.h5"), [`apodize.window=${at("short.npy")}`])).rejects.toThrow(
      /shape is 5; must be that of the windowed axes, 192 x 192/,
    );
    await expect(reconstructed(at("disc.h5"), [`apodize.window=${at("half.npy")}`])).rejects.toThrow(
      /is 0.25; must be 1, so that the level stays/,
    );
  });

  test("radial is a circle in cycles per mm, elliptical reaches each axis's own edge", () => {
    const layout: Layout = {
      ...LAYOUT,
      shape: [1, 1, SIZE / 2, SIZE],
      acquired: { ...LAYOUT.acquired, y: { first: 0, last: SIZE / 2 - 1 } },
    };
    const ones = () => Float32Array.from({ length: SIZE * SIZE }, (_, i) => (i % 2 ? 0 : 1));
    const inside = (shape: string) =>
      apply({ window: "none", shape }, ones(), layout).data.reduce((n, v) => n + v, 0);
    // y has half as many samples over the same field of view: the circle has radius N/4, the ellipse N/2 and N/4.
    expect(inside("radial") / (Math.PI * 24 ** 2)).toBeCloseTo(1, 1);
    expect(inside("elliptical") / (Math.PI * 24 * 48)).toBeCloseTo(1, 1);
  });
});
