import { foldedInAny, objectField } from "../kernels/displacement.js";
import { fieldRangeHz } from "../kernels/echo-times.js";
import { fatFraction, threePointDixon, twoPointDixon } from "../kernels/fat-water.js";
import { coarseFatWaterField } from "../kernels/fat-water-field.js";
import { type FatWaterModel, fatSignal, type SpectralLine } from "../kernels/fat-water-model.js";
import { type FatWaterImages, separateFatWater } from "../kernels/fat-water-solve.js";
import { fillUnknown } from "../kernels/fill.js";
import { fitMagnitudes } from "../kernels/magnitude-fit.js";
import { signalMask, withoutSpecks } from "../kernels/signal-mask.js";
import { smoothField } from "../kernels/smooth-field.js";
import type { TransformEngine } from "../kernels/transform.js";
import type { Params } from "./fat-water-parameters.js";

/** Signal below this share of the bright level belongs to no species. */
const OBJECT_SHARE = 0.1;

/** Water and fat of one image, real maps [rows, columns]. */
export interface Solved
  extends Pick<FatWaterImages, "fieldHz" | "standardErrorHz" | "echoPhase" | "residual"> {
  readonly water: Float32Array;
  readonly fat: Float32Array;
  readonly fraction: Float32Array;
  readonly decayPerSecond: Float32Array | undefined;
  /** 1 in the object where the field does not fold. */
  readonly mask: Uint8Array;
  /** Pixels of the object where it does. */
  readonly foldedCount: number;
}

/** @param echoes combined images, [rows, model.length] each */
export function solve(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  rows: number,
  model: FatWaterModel,
  spectrum: readonly SpectralLine[],
  params: Params,
  noiseDeviation: number,
): Solved {
  const lines = echoes.map((echo) => {
    const line = engine.allocate(echo.length, false);
    engine.transformAxis({
      source: echo,
      target: line,
      outer: rows,
      inner: 1,
      length: model.length,
      inverse: false,
    });
    return line;
  });
  const start = startField(engine, echoes, lines, rows, model, params, noiseDeviation);
  const images = separateFatWater(engine, lines, model, rows, start, {
    rounds: params["echo-phase"] ? 6 : params.decay ? 5 : 2,
    refineField: model.echoes > 2,
    smoothingPixels: params["smoothing-px"],
    noiseDeviation,
    fitDecay: params.decay,
    fitEchoPhase: params["echo-phase"],
    keepEchoes: params.fit === "magnitude",
  });
  for (const line of lines) engine.release(line);
  const gain = Math.max(1, model.noiseGain.water, model.noiseGain.fat);
  const object = signalMask([images.water, images.fat], OBJECT_SHARE, gain * noiseDeviation);
  return {
    ...images,
    ...withoutFolds(images.fieldHz, object, rows, model),
    ...(params.fit === "magnitude"
      ? fromMagnitudes(images, model, spectrum, params, object)
      : fromComplex(images, object)),
  };
}

/** The field extended from the object over what holds no signal, and where it is known without folding. */
function withoutFolds(
  fieldHz: Float32Array,
  object: Uint8Array,
  rows: number,
  { length, timing }: FatWaterModel,
) {
  const solid = withoutSpecks(object, { slices: 1, rows, columns: length });
  fillUnknown(fieldHz, solid, rows, length);
  const folded = foldedInAny(fieldHz, timing.pixelBandwidthHz, rows, length);
  const mask = solid.map((flag, i) => flag & (1 - folded[i]!));
  return { mask, foldedCount: solid.reduce((sum, flag, i) => sum + (flag & folded[i]!), 0) };
}

function fromComplex({ water, fat, decayPerSecond }: FatWaterImages, object: Uint8Array) {
  return {
    water: magnitude(water),
    fat: magnitude(fat),
    fraction: fatFraction(water, fat, object),
    decayPerSecond,
  };
}

function fromMagnitudes(
  { echoMagnitudes }: FatWaterImages,
  { timing }: FatWaterModel,
  spectrum: readonly SpectralLine[],
  { decay }: Params,
  object: Uint8Array,
) {
  const { echoSeconds } = timing;
  const signals = echoSeconds.flatMap((seconds) => fatSignal(spectrum, seconds));
  const fitted = fitMagnitudes(echoMagnitudes!, echoSeconds, signals, decay, object);
  const fraction = fitted.water.map((water, i) => {
    const total = water + fitted.fat[i]!;
    return total > 0 ? fitted.fat[i]! / total : 0;
  });
  return { ...fitted, fraction };
}

/** The first field, object's coordinates, [rows, model.length]. */
function startField(
  engine: TransformEngine,
  echoes: readonly Float32Array[],
  lines: readonly Float32Array[],
  rows: number,
  model: FatWaterModel,
  params: Params,
  noiseDeviation: number,
): Float32Array {
  const { timing, length } = model;
  if (params.method === "least-squares")
    return coarseFatWaterField(
      engine,
      lines,
      model,
      rows,
      fieldRangeHz(timing.echoSeconds, timing.pixelBandwidthHz),
    ).fieldHz;
  const mask = signalMask(echoes, OBJECT_SHARE, noiseDeviation);
  const size = { slices: 1, rows, columns: length };
  const { echoSeconds } = timing;
  const middle = Math.floor(length / 2);
  const fatAt = (echo: number) => model.fat[2 * (echo * length + middle)]!; // at k = 0, the echo time
  const byFat = [...echoSeconds.keys()].sort((a, b) => fatAt(b) - fatAt(a));
  // the echo in which fat adds most to water, and the one in which it takes most away
  const [inPhase, opposed] = params.method === "two-point" ? [byFat[0]!, byFat.at(-1)!] : [0, 1];
  const { radians } =
    params.method === "two-point"
      ? twoPointDixon(echoes[inPhase]!, echoes[opposed]!, mask, size)
      : threePointDixon(echoes[0]!, echoes[1]!, echoes[2]!, mask, size);
  const perHz = -1 / (2 * Math.PI * (echoSeconds[opposed]! - echoSeconds[inPhase]!));
  const measured = radians.map((value) => value * perHz);
  const weights = Float32Array.from(mask);
  const { fieldHz } = smoothField(measured, weights, rows, length, params["smoothing-px"], false);
  return objectField(fieldHz, rows, length, timing.pixelBandwidthHz[0]!).fieldHz;
}

function magnitude(image: Float32Array): Float32Array {
  const out = new Float32Array(image.length / 2);
  for (let p = 0, i = 0; p < out.length; p++, i += 2)
    out[p] = Math.sqrt(image[i]! * image[i]! + image[i + 1]! * image[i + 1]!);
  return out;
}
