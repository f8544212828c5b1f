import { describe, expect, it } from "vitest";
import { turnEcho } from "../../src/kernels/echo-phase.js";
import { firstEchoPhase } from "../../src/kernels/echo-phase-start.js";
import { coarseFatWaterField } from "../../src/kernels/fat-water-field.js";
import { fatSignal, fatWaterModel } from "../../src/kernels/fat-water-model.js";
import { type FatWaterOptions, separateFatWater } from "../../src/kernels/fat-water-solve.js";
import { fitMagnitudes } from "../../src/kernels/magnitude-fit.js";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { relativeL2 } from "./reference-transform.js";
import { seededNormal } from "./seeded-normal.js";
import { addNoise, magnitudes, maskedError, simulateEcho } from "./simulated-echoes.js";

const engine = createPlainEngine();
const [ROWS, LENGTH] = [48, 64];
const SPECTRUM = [
  [0.6, 0.047],
  [-0.5, 0.039],
  [-1.95, 0.006],
  [-2.6, 0.12],
  [-3.4, 0.7],
  [-3.8, 0.088],
] as const; // Hamilton et al. 2011 [from memory]
const linesAt = (teslas: number) =>
  SPECTRUM.map(([ppm, share]) => ({ offsetHz: ppm * 42.577478461 * teslas, share }));

const within = (x: number, y: number, cx: number, cy: number, a: number, b: number) =>
  ((x - cx) / a) ** 2 + ((y - ROWS / 2 - cy) / b) ** 2 <= 1;
/** A ring of fat around water, a spot of fat in it, a mixed insert. */
const spot = (x: number, y: number) => within(x, y, 7, -7, 4, 4);
const mixed = (x: number, y: number) => within(x, y, -7, 6, 6, 5);
const water = (x: number, y: number) =>
  within(x, y, 0, 0, 22, 17) && !spot(x, y) ? (mixed(x, y) ? 0.5 : 1) : 0;
const fat = (x: number, y: number) =>
  spot(x, y) ? 1.3 : mixed(x, y) ? 0.4 : within(x, y, 0, 0, 27, 21) && !within(x, y, 0, 0, 22, 17) ? 1.2 : 0;
const field = (x: number, y: number) => 1.2 * x + 40 * Math.cos(y / 14) + 25;

const reference = (amount: (x: number, y: number) => number) =>
  magnitudes(
    simulateEcho(
      { rows: ROWS, length: LENGTH, density: 3, water: amount, fieldHz: () => 0 },
      { seconds: 0, pixelBandwidthHz: Number.POSITIVE_INFINITY },
    ),
  );
const [trueWater, trueFat] = [reference(water), reference(fat)];
const mask = trueWater.map((value, i) => (value + trueFat[i]! > 0.25 ? 1 : 0));
const OPTIONS: FatWaterOptions = {
  rounds: 3,
  refineField: true,
  smoothingPixels: 2,
  noiseDeviation: 0.004,
  fitDecay: false,
  fitEchoPhase: false,
  keepEchoes: false,
};

interface Scan {
  readonly teslas: number;
  readonly echoSeconds: number[];
  readonly pixelBandwidthHz: number[];
  readonly decayPerSecond?: () => number;
  readonly fieldHz?: (x: number, y: number) => number;
}
const ALTERNATING: Scan = {
  teslas: 3,
  echoSeconds: [0.0026, 0.00338, 0.00416],
  pixelBandwidthHz: [250, -250, 250],
};

function scanned(scan: Scan) {
  const normal = seededNormal(17);
  const { decayPerSecond, fieldHz = field } = scan;
  const object = {
    rows: ROWS,
    length: LENGTH,
    density: 3,
    water,
    fat,
    fieldHz,
    ...(decayPerSecond && { decayPerSecond }),
  };
  const lines = scan.echoSeconds.map((seconds, e) => {
    const echo = { seconds, pixelBandwidthHz: scan.pixelBandwidthHz[e]!, lines: linesAt(scan.teslas) };
    const image = addNoise(simulateEcho(object, echo), 0.004, normal);
    engine.transformAxis({
      source: image,
      target: image,
      outer: ROWS,
      inner: 1,
      length: LENGTH,
      inverse: false,
    });
    return image;
  });
  return { lines, model: fatWaterModel(scan, linesAt(scan.teslas), LENGTH) };
}

function swappedShare(w: Float32Array, f: Float32Array): number {
  let [swapped, count] = [0, 0];
  for (let p = 0; p < mask.length; p++) {
    if (!mask[p]) continue;
    count++;
    const [tw, tf] = [trueWater[p]!, trueFat[p]!];
    if ((tw > 2 * tf && f[p]! > w[p]!) || (tf > 2 * tw && w[p]! > f[p]!)) swapped++;
  }
  return swapped / count;
}

const trueField = Float32Array.from({ length: ROWS * LENGTH }, (_, i) =>
  field((i % LENGTH) - LENGTH / 2, Math.floor(i / LENGTH)),
);

describe("separateFatWater", () => {
  it("finds water, fat and field from alternating echoes, without swaps", () => {
    const { lines, model } = scanned(ALTERNATING);
    const before = lines.map((line) => line.slice());
    const coarse = coarseFatWaterField(engine, lines, model, ROWS, 641);
    const found = separateFatWater(engine, lines, model, ROWS, coarse.fieldHz, OPTIONS);
    const [w, f] = [magnitudes(found.water), magnitudes(found.fat)];
    // noise 0.004 of a level of 1 with gains of 0.7 and 1.0, edges of the band, 0.5 Hz of field
    expect(maskedError(w, trueWater, mask)).toBeLessThan(0.015);
    expect(maskedError(f, trueFat, mask)).toBeLessThan(0.02);
    expect(swappedShare(w, f)).toBe(0);
    const errors = [...found.fieldHz]
      .filter((_, i) => mask[i])
      .map((hz, i) => Math.abs(hz - [...trueField].filter((__, j) => mask[j])[i]!));
    errors.sort((a, b) => a - b);
    expect(errors[Math.floor(errors.length / 2)]).toBeLessThan(0.5);
    expect(errors[Math.floor(errors.length * 0.95)]).toBeLessThan(2);
    expect(lines).toEqual(before); // the input is not modified
    const again = separateFatWater(engine, lines, model, ROWS, coarse.fieldHz, OPTIONS);
    expect(again.water).toEqual(found.water); // same bits
  });

  it("follows a field that is far from zero and steep", () => {
    const fieldHz = (x: number, y: number) => 180 + 4 * x - 2 * (y - 24);
    const { lines, model } = scanned({ ...ALTERNATING, pixelBandwidthHz: [500, -500, 500], fieldHz });
    const coarse = coarseFatWaterField(engine, lines, model, ROWS, 641);
    const found = separateFatWater(engine, lines, model, ROWS, coarse.fieldHz, OPTIONS);
    expect(swappedShare(magnitudes(found.water), magnitudes(found.fat))).toBe(0);
    expect(maskedError(magnitudes(found.water), trueWater, mask)).toBeLessThan(0.02);
  });

  it("needs more than one round where the field is steep, and separates two echoes under a known field", () => {
    const { lines, model } = scanned(ALTERNATING);
    const known = { ...OPTIONS, refineField: false };
    const once = magnitudes(
      separateFatWater(engine, lines, model, ROWS, trueField, { ...known, rounds: 1 }).water,
    );
    const twice = magnitudes(
      separateFatWater(engine, lines, model, ROWS, trueField, { ...known, rounds: 2 }).water,
    );
    expect(maskedError(twice, trueWater, mask)).toBeLessThan(0.8 * maskedError(once, trueWater, mask));
    const pair = { echoSeconds: [0.0026, 0.00378], pixelBandwidthHz: [250, 250], teslas: 3 };
    const two = scanned(pair);
    const found = separateFatWater(engine, two.lines, two.model, ROWS, trueField, known);
    expect(maskedError(magnitudes(found.water), trueWater, mask)).toBeLessThan(0.02);
    expect(Math.max(...found.residual)).toBeLessThan(0.4); // two echoes always fit, but for what lies outside the pixels' band
  });

  it("fits a common R2* and refits magnitudes", () => {
    const echoSeconds = [1, 2, 3, 4, 5, 6].map((n) => 0.0012 + 0.0016 * n);
    const scan = {
      teslas: 1.5,
      echoSeconds,
      pixelBandwidthHz: new Array<number>(6).fill(300),
      decayPerSecond: () => 40,
    };
    const { lines, model } = scanned(scan);
    const coarse = coarseFatWaterField(engine, lines, model, ROWS, 312);
    const set = { ...OPTIONS, rounds: 5, fitDecay: true, keepEchoes: true };
    const found = separateFatWater(engine, lines, model, ROWS, coarse.fieldHz, set);
    const rates = [...found.decayPerSecond!].filter((_, i) => mask[i]).sort((a, b) => a - b);
    expect(rates[Math.floor(rates.length / 2)]).toBeGreaterThan(38); // 0.004 noise over a span of 8 ms: 0.6 / s per pixel
    expect(rates[Math.floor(rates.length / 2)]).toBeLessThan(42);
    expect(maskedError(magnitudes(found.water), trueWater, mask)).toBeLessThan(0.02);
    const signals = echoSeconds.flatMap((seconds) => fatSignal(linesAt(1.5), seconds));
    const refit = fitMagnitudes(found.echoMagnitudes!, echoSeconds, signals, true, mask);
    expect(maskedError(refit.water, trueWater, mask)).toBeLessThan(0.05); // the magnitudes of six echoes tell the species apart less well
    expect(swappedShare(refit.water, refit.fat)).toBeLessThan(0.01);
  });

  it("estimates an odd/even phase on request", () => {
    const { lines, model } = scanned(ALTERNATING);
    for (const [e, line] of lines.entries()) {
      turnEcho(engine, line, ROWS, { radians: 0.6, radiansPerPixel: -0.02 }, e === 1 ? 1 : -1);
    }
    const ignored = separateFatWater(
      engine,
      lines,
      model,
      ROWS,
      coarseFatWaterField(engine, lines, model, ROWS, 641).fieldHz,
      OPTIONS,
    );
    expect(maskedError(magnitudes(ignored.water), trueWater, mask)).toBeGreaterThan(0.1);
    const { echoPhase, coarse } = firstEchoPhase(engine, lines, model, ROWS, 641);
    const found = separateFatWater(engine, lines, model, ROWS, coarse.fieldHz, {
      ...OPTIONS,
      rounds: 6,
      fitEchoPhase: true,
    });
    expect(echoPhase.radians + found.echoPhase.radians).toBeCloseTo(0.6, 2);
    expect(echoPhase.radiansPerPixel + found.echoPhase.radiansPerPixel).toBeCloseTo(-0.02, 3);
    expect(maskedError(magnitudes(found.water), trueWater, mask)).toBeLessThan(0.02);
  });

  it("takes an echo phase off and puts it on", () => {
    const { lines } = scanned(ALTERNATING);
    const there = lines[0]!.slice();
    turnEcho(engine, there, ROWS, { radians: 0.4, radiansPerPixel: 0.01 }, 1);
    expect(relativeL2(there, lines[0]!)).toBeGreaterThan(0.1);
    turnEcho(engine, there, ROWS, { radians: 0.4, radiansPerPixel: 0.01 }, -1);
    expect(relativeL2(there, lines[0]!)).toBeLessThan(1e-6); // float32
  });

  it("refuses a joint field from two echoes", () => {
    const two = scanned({ teslas: 3, echoSeconds: [0.0026, 0.00378], pixelBandwidthHz: [250, 250] });
    expect(() => coarseFatWaterField(engine, two.lines, two.model, ROWS, 400)).toThrow(RangeError);
  });
});
