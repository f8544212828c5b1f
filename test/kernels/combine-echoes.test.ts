import { describe, expect, it } from "vitest";
import { channelWeights, combineEchoes } from "../../src/kernels/combine-echoes.js";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { seededNormal } from "./seeded-normal.js";
import { addNoise, magnitudes, maskedError, simulateEcho } from "./simulated-echoes.js";

const [ROWS, LENGTH, COILS] = [50, 61, 4];
const engine = createPlainEngine();

/** Smooth lobes around the object with a phase roll. */
function coil(c: number) {
  const angle = (2 * Math.PI * c) / COILS + 0.3;
  return (x: number, y: number): [number, number] => {
    const v = y - ROWS / 2;
    const size = Math.exp(
      -((x - 34 * Math.cos(angle)) ** 2 + (v - 34 * Math.sin(angle)) ** 2) / (2 * 27 ** 2),
    );
    const phase = angle + (0.8 * Math.PI * (x * Math.cos(angle) + v * Math.sin(angle))) / 60;
    return [size * Math.cos(phase), size * Math.sin(phase)];
  };
}
const level = (x: number, y: number) =>
  Math.hypot(...Array.from({ length: COILS }, (_, c) => coil(c)(x, y)).flat());
const water = (x: number, y: number) => (x * x + (y - 25) ** 2 < 400 ? 1 : 0);

function channels(
  seconds: number,
  fieldHz: (x: number, y: number) => number,
  pixelBandwidthHz: number,
): Float32Array {
  const out = new Float32Array(2 * COILS * ROWS * LENGTH);
  for (let c = 0; c < COILS; c++) {
    const object = { rows: ROWS, length: LENGTH, density: 1, water, fieldHz, coil: coil(c) };
    out.set(simulateEcho(object, { seconds, pixelBandwidthHz }), 2 * c * ROWS * LENGTH);
  }
  return out;
}

/** Channel images one after the other: [coils, rows, columns]. */
const packed = (data: Float32Array) => ({
  data,
  start: 0,
  coilStride: 2 * ROWS * LENGTH,
  rowStride: 2 * LENGTH,
});

describe("echo combination", () => {
  const mask = Uint8Array.from({ length: ROWS * LENGTH }, (_, i) =>
    water((i % LENGTH) - 30, Math.floor(i / LENGTH)),
  );

  it("has the level of the root of the sum of squares and keeps the phase between echoes", () => {
    const field = (x: number) => 40 + x;
    const normal = seededNormal(2);
    const still = Number.POSITIVE_INFINITY;
    const echoes = [0.002, 0.004].map((seconds) => addNoise(channels(seconds, field, still), 0.002, normal));
    const images = echoes.map(packed);
    const combined = combineEchoes(images, channelWeights(images, COILS, ROWS, LENGTH), ROWS, LENGTH, engine);
    const root = Float32Array.from({ length: ROWS * LENGTH }, (_, i) =>
      level((i % LENGTH) - 30, Math.floor(i / LENGTH)),
    );
    for (const image of combined) {
      // noise 0.002 of a level near 1, weights linear between blocks of 2 pixels: second order in their change
      expect(maskedError(magnitudes(image), root, mask)).toBeLessThan(0.004);
    }
    for (let p = 0; p < mask.length; p++) {
      if (!mask[p]) continue;
      const [a, b] = [combined[0]!.subarray(2 * p), combined[1]!.subarray(2 * p)];
      const turn = Math.atan2(b[1]! * a[0]! - b[0]! * a[1]!, b[0]! * a[0]! + b[1]! * a[1]!);
      expect(Math.abs(turn + 2 * Math.PI * field((p % LENGTH) - 30) * 0.002)).toBeLessThan(0.03); // ten times the noise
    }
  });

  it("sees a displaced spin at the level and phase of its own place, to second order", () => {
    // An echo moved by 2 px and one that is not, under weights of both: their quotient at the object's points is 1.
    const moved = channels(0, () => 200, 100);
    const still = channels(0, () => 0, 100);
    const images = [still, moved].map(packed);
    const weights = channelWeights(images, COILS, ROWS, LENGTH);
    const [a, b] = combineEchoes(images, weights, ROWS, LENGTH, engine) as [Float32Array, Float32Array];
    let worst = 0;
    for (let p = 0; p < mask.length; p++) {
      if (!mask[p] || !mask[p + 2] || !mask[p - 2] || !mask[p + 4]) continue;
      const [re, im] = [b[2 * p + 4]! - a[2 * p]!, b[2 * p + 5]! - a[2 * p + 1]!];
      worst = Math.max(worst, Math.hypot(re, im) / Math.hypot(a[2 * p]!, a[2 * p + 1]!));
    }
    // d^2/2 times the squared change of the unit vectors, 0.05 per pixel at most: 0.005; the phases of the channels turn by
    // up to 0.08 rad over the two pixels, so that a combination that ignores them errs ten times as much
    expect(worst).toBeLessThan(0.015);
  });
});
