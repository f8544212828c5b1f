import { type EchoPhase, echoPhaseSlope, turnEcho } from "./echo-phase.js";
import { type CoarseField, coarseFatWaterField } from "./fat-water-field.js";
import type { FatWaterModel } from "./fat-water-model.js";
import { toImage } from "./fat-water-steps.js";
import type { TransformEngine } from "./transform.js";

/** Values of the constant tried over a quarter turn. */
const TRIALS = 10;

/**
 * A first echo phase (echo-phase.ts) and the first field that goes with it: the slope from the echoes' products, the
 * constant by trying values within an eighth of a turn either way and keeping the one under which water and fat explain
 * most, with a field free for each block.
 * @param lines k-space along x of the combined echoes; turned by the phase found
 * @throws RangeError for fewer than three echoes, or without a triple that alternates
 */
export function firstEchoPhase(
  engine: TransformEngine,
  lines: readonly Float32Array[],
  model: FatWaterModel,
  rows: number,
  rangeHz: number,
): { echoPhase: EchoPhase; coarse: CoarseField } {
  const signs = model.timing.pixelBandwidthHz.map(Math.sign);
  const first = signs.findIndex((sign, e) => signs[e + 1] === -sign && signs[e + 2] === sign);
  if (first < 0)
    throw new RangeError(`echoes with directions ${signs.join(", ")} hold no triple that alternates`);
  const turnAll = (phase: EchoPhase) => {
    for (const [e, line] of lines.entries()) turnEcho(engine, line, rows, phase, signs[e]!);
  };
  const images = [0, 1, 2].map((j) => {
    const image = new Float32Array(lines[first + j]!.length);
    toImage(engine, lines[first + j]!, image, rows, model.length);
    return image;
  }) as [Float32Array, Float32Array, Float32Array];
  const radiansPerPixel = echoPhaseSlope(images, model.length, signs[first] === 1);
  const step = Math.PI / 2 / TRIALS;
  const lowest = -Math.PI / 4 + step / 2;
  turnAll({ radians: lowest, radiansPerPixel });
  let best = { radians: lowest, coarse: coarseFatWaterField(engine, lines, model, rows, rangeHz) };
  for (let trial = 1; trial < TRIALS; trial++) {
    turnAll({ radians: step, radiansPerPixel: 0 });
    const coarse = coarseFatWaterField(engine, lines, model, rows, rangeHz);
    if (coarse.unexplained < best.coarse.unexplained) best = { radians: lowest + trial * step, coarse };
  }
  turnAll({ radians: best.radians - (lowest + (TRIALS - 1) * step), radiansPerPixel: 0 });
  return { echoPhase: { radians: best.radians, radiansPerPixel }, coarse: best.coarse };
}
