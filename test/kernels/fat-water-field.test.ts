import { describe, expect, it } from "vitest";
import { coarseFatWaterField } from "../../src/kernels/fat-water-field.js";
import { fatWaterModel } from "../../src/kernels/fat-water-model.js";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";

const engine = createPlainEngine();
const SIZE = 64;
const RADIUS = 22;
const ECHOES = [2.3e-3, 3.9e-3, 5.5e-3];
/** Six peaks of Hamilton 2011 at 63.87 MHz. */
const LINES = [
  [0.6, 0.047],
  [-0.5, 0.039],
  [-1.95, 0.006],
  [-2.6, 0.12],
  [-3.4, 0.7],
  [-3.8, 0.088],
].map(([ppm, share]) => ({ offsetHz: ppm! * 63.87, share: share! }));

/** k-space along x of a disc of water, the field's displacement left out: 600 Hz per pixel would move it by half of one. */
function waterLines(fieldHz: (x: number, y: number) => number): Float32Array[] {
  return ECHOES.map((seconds) => {
    const image = new Float32Array(2 * SIZE * SIZE);
    for (let i = 0; i < SIZE * SIZE; i++) {
      const [x, y] = [(i % SIZE) - SIZE / 2, Math.floor(i / SIZE) - SIZE / 2];
      if (x * x + y * y > RADIUS * RADIUS) continue;
      const angle = -2 * Math.PI * fieldHz(x, y) * seconds;
      image.set([Math.cos(angle), Math.sin(angle)], 2 * i);
    }
    const line = new Float32Array(image.length);
    engine.transformAxis({
      source: image,
      target: line,
      outer: SIZE,
      inner: 1,
      length: SIZE,
      inverse: false,
    });
    return line;
  });
}

describe("coarseFatWaterField", () => {
  // Half of these discs would be taken for fat in a field 217 Hz away if the slope itself had a price.
  it.each([
    [9, 7],
    [-11, 3],
    [2, -1],
  ])("follows a slope of %d and %d Hz per pixel through water alone", (gx, gy) => {
    const field = (x: number, y: number) => gx * x + gy * y;
    const timing = { echoSeconds: ECHOES, pixelBandwidthHz: [600, 600, 600] };
    const model = fatWaterModel(timing, LINES, SIZE);
    const { fieldHz } = coarseFatWaterField(engine, waterLines(field), model, SIZE, 312.5);
    let [wrong, count] = [0, 0];
    for (let i = 0; i < SIZE * SIZE; i++) {
      const [x, y] = [(i % SIZE) - SIZE / 2, Math.floor(i / SIZE) - SIZE / 2];
      if (x * x + y * y > (RADIUS - 4) ** 2) continue; // blocks of four pixels blur the rim
      count++;
      if (Math.abs(fieldHz[i]! - field(x, y)) > 60) wrong++;
    }
    expect(wrong / count).toBeLessThan(0.01);
  });
});
