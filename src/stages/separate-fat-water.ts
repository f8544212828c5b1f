import { UsageError } from "../errors.js";
import { foldedPixels, objectField } from "../kernels/displacement.js";
import { fatFraction, threePointDixon, twoPointDixon } from "../kernels/fat-water.js";
import { coarseFatWaterField } from "../kernels/fat-water-field.js";
import {
  type FatWaterModel,
  fatSignal,
  fatWaterModel,
  type SpectralLine,
} from "../kernels/fat-water-model.js";
import { type FatWaterImages, separateFatWater } from "../kernels/fat-water-solve.js";
import { fitMagnitudes } from "../kernels/magnitude-fit.js";
import { signalMask } from "../kernels/signal-mask.js";
import { smoothField } from "../kernels/smooth-field.js";
import type { TransformEngine } from "../kernels/transform.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM, FAT_SPECTRUM } from "../physics/chemical-shift.js";
import { cropStart } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  checkEchoes,
  columnsInView,
  EchoFrame,
  type EchoTiming,
  echoTiming,
  mapLayout,
  pixelBandwidthHz,
  pixelMm,
  rounded,
} from "./echo-frame.js";
import { noiseOf } from "./field-map.js";
import { FieldValues, fieldMapPlans, refuseSecondField } from "./field-values.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type FrameStage, type Layout, type MapPlan } from "./stage.js";

interface Params {
  readonly method: "two-point" | "three-point" | "least-squares";
  readonly spectrum: "six-peak" | "one-peak" | readonly (readonly [ppm: number, share: number])[];
  readonly fit: "complex" | "magnitude";
  readonly decay: boolean;
  readonly "echo-phase": boolean;
  readonly "smoothing-px": number;
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    method: {
      description:
        "how the field is found first: two-point (in and opposed phase), three-point (0, half and one turn of fat), least-squares (three or more echoes, any times)",
      enum: ["two-point", "three-point", "least-squares"],
      default: "least-squares",
    },
    spectrum: {
      description: "of fat: six-peak, one-peak, or a list of [ppm from water, share]",
      default: "six-peak",
      anyOf: [
        { enum: ["six-peak", "one-peak"] },
        {
          type: "array",
          minItems: 1,
          items: { type: "array", items: { type: "number" }, minItems: 2, maxItems: 2 },
        },
      ],
    },
    fit: {
      description: "complex, or of magnitudes (where phases cannot be trusted)",
      enum: ["complex", "magnitude"],
      default: "complex",
    },
    decay: { description: "fit one R2* per pixel for water and fat", type: "boolean", default: false },
    "echo-phase": {
      description: "fit an odd/even phase between echoes read forward and backward",
      type: "boolean",
      default: false,
    },
    "smoothing-px": {
      description: "standard deviation of the window that smooths the field, pixels",
      type: "number",
      minimum: 0,
      default: 2,
    },
  },
};

const ID = "separate-fat-water";
/** Signal below this share of the bright level belongs to no species. */
const OBJECT_SHARE = 0.1;
/** How far fat may be from in phase or opposed at the echoes of the closed forms: a twelfth of a turn. */
const PHASE_TOLERANCE_TURNS = 1 / 12;
/** Pixels beyond fat's displacement that are kept at each edge, for the field's. */
const EDGE_PIXELS = 4;

/**
 * Water and fat from echoes, and the field with them. The echoes are combined with one set of channel weights; a first
 * field comes from the closed forms of two (Dixon 1984, Radiology 153:189) or three points (Glover and Schneider 1991,
 * Magn Reson Med 18:371), or from candidate fields chosen for all blocks of pixels together by message passing on their
 * graph (cost: Hernando et al. 2010, Magn Reson Med 63:79). What decides where a pixel holds one species only: the
 * field's smoothness towards pixels that hold both, then the shape of the spectrum, then the field nearest zero. Then water
 * and fat are solved at the exact sampling time of each k-space sample (Brodsky et al. 2008, Magn Reson Med 59:1151) for
 * each echo's direction of reading, which puts both in their true place, the field refined in between (Reeder et al.
 * 2004, Magn Reson Med 51:35). The images pass unchanged.
 */
export const separateFatWaterStage: FrameStage<Params> = {
  id: ID,
  kind: "series",
  together: () => ["contrast"],
  summary: "water, fat and the field from several echoes, each in its true place",
  schema,
  parse(raw) {
    const params = parseBySchema<Params>(ID, schema, raw);
    spectralLines(params, 1);
    return params;
  },
  plan(layout, params, scan, { maps }) {
    checkEchoes(ID, layout, scan, params.method === "two-point" ? 2 : 3);
    refuseSecondField(ID, maps);
    const timing = echoTiming(ID, layout, scan);
    checkMethod(params, timing, scan);
    const columns = workColumns(layout, scan);
    const model = fatWaterModel(timing, spectralLines(params, scan.resonanceHz), columns);
    return {
      layout,
      maps: mapPlans(params, mapLayout(layout, scan), scan.lengths.contrast > 2),
      workBytes: 8 * axisLength(layout, "y") * columns * (scan.channels + 8) * scan.lengths.contrast,
      physics: {
        "echo times, ms": timing.echoSeconds.map((seconds) => rounded(seconds * 1e3)).join(", "),
        "bandwidth per pixel, Hz": timing.pixelBandwidthHz.map(rounded).join(", "),
        "fat, main peak, Hz": rounded(chemicalShiftHz(FAT_MAIN_PEAK_PPM, scan.resonanceHz)),
        "fields considered, Hz":
          params.method === "least-squares" ? `within ${rounded(rangeHz(timing))}` : "any, unwrapped",
        "noise of water and of fat against one echo": `${rounded(model.noiseGain.water)}, ${rounded(model.noiseGain.fat)}`,
      },
    };
  },
  run(frame, params, context) {
    const images = new EchoFrame(frame);
    const { scan } = context;
    const { transform } = context.kernels;
    const timing = echoTiming(ID, frame.layout, scan);
    const spectrum = spectralLines(params, scan.resonanceHz);
    const wide = workColumns(frame.layout, scan);
    const columns = columnsInView(frame.layout, scan);
    const model = fatWaterModel(timing, spectrum, wide);
    const out = new SpeciesValues(
      params,
      images.echoes > 2,
      images.slices * images.partitions * images.rows * columns,
    );
    for (let slice = 0; slice < images.slices; slice++)
      for (let z = 0; z < images.partitions; z++) {
        const echoes = images.combined(slice, z, wide);
        const noiseDeviation = noiseOf(frame, echoes[0]!, images.rows, wide);
        const solved = solve(transform, echoes, images.rows, model, spectrum, params, noiseDeviation);
        const folded = foldedPixels(
          solved.images.fieldHz.map((hz) => hz / timing.pixelBandwidthHz[0]!),
          images.rows,
          wide,
        );
        let foldedCount = 0;
        solved.mask.forEach((flag, i) => {
          foldedCount += flag & folded[i]!;
          solved.mask[i] = flag & (1 - folded[i]!);
        });
        context.note({ name: "folded pixels", value: foldedCount });
        out.add(solved, wide, columns, (slice * images.partitions + z) * images.rows * columns);
        if (!params["echo-phase"]) continue;
        context.note({ name: "odd/even echo phase, rad", value: solved.images.echoPhase.radians });
        context.note({
          name: "odd/even echo phase, rad per pixel",
          value: solved.images.echoPhase.radiansPerPixel,
        });
      }
    out.field.emit(context, pixelMm(frame.layout) / pixelBandwidthHz(frame.layout, scan));
    for (const [name, data] of out.species) context.emit({ name, data });
    return frame;
  },
};

/** @throws UsageError for shares that do not add up to something above zero */
function spectralLines({ spectrum }: Params, resonanceHz: number): SpectralLine[] {
  const peaks =
    spectrum === "six-peak"
      ? FAT_SPECTRUM
      : spectrum === "one-peak"
        ? [{ ppm: FAT_MAIN_PEAK_PPM, share: 1 }]
        : spectrum.map(([ppm, share]) => ({ ppm, share }));
  const total = peaks.reduce((sum, { share }) => sum + share, 0);
  if (!(total > 0) || peaks.some(({ share }) => share < 0))
    throw new UsageError(
      { field: `${ID}.spectrum` },
      "the shares of a spectrum must not be negative and add up to more than 0",
      "For example: [[-3.4, 0.75], [0.6, 0.25]]",
    );
  return peaks.map(({ ppm, share }) => ({
    offsetHz: chemicalShiftHz(ppm, resonanceHz),
    share: share / total,
  }));
}

/** Fields up to half a turn between the closest echoes; beyond, they repeat where echoes are evenly spaced. */
function rangeHz({ echoSeconds }: EchoTiming): number {
  const sorted = [...echoSeconds].sort((a, b) => a - b);
  return 1 / (2 * Math.min(...sorted.slice(1).map((seconds, i) => seconds - sorted[i]!)));
}

/** Turns of fat's main peak at a time, from -1/2 to 1/2. */
function fatTurns(seconds: number, resonanceHz: number): number {
  const turns = chemicalShiftHz(FAT_MAIN_PEAK_PPM, resonanceHz) * seconds;
  return turns - Math.round(turns);
}

const isInPhase = (turns: number) => Math.abs(turns) < PHASE_TOLERANCE_TURNS;
const isOpposed = (turns: number) => 0.5 - Math.abs(turns) < PHASE_TOLERANCE_TURNS;

/** @throws UsageError for echoes that the chosen method cannot work on */
function checkMethod(
  { method, decay, fit, "echo-phase": echoPhase }: Params,
  timing: EchoTiming,
  scan: ScanFacts,
): void {
  const { echoSeconds, pixelBandwidthHz: bandwidths } = timing;
  const refuse = (key: string, value: unknown, rule: string, mend: string) => {
    throw new UsageError({ field: `${ID}.${key}`, value }, rule, mend);
  };
  const spread = new Set(echoSeconds).size;
  if (spread < echoSeconds.length)
    refuse("method", method, "two echoes have the same time", "Correct them: --set 'scan.echo-ms=[...]'");
  const least = "Use method: least-squares, with three or more echoes";
  if ((decay || fit === "magnitude") && echoSeconds.length < 3)
    refuse(
      decay ? "decay" : "fit",
      decay || fit,
      `needs three echoes, there are ${echoSeconds.length}`,
      least,
    );
  const mixed = new Set(bandwidths).size > 1;
  if (echoPhase && !mixed)
    refuse(
      "echo-phase",
      true,
      "all echoes are read in one direction: there is no odd/even phase",
      "Take it out",
    );
  if (method === "least-squares") return;
  if (mixed)
    refuse("method", method, "compares echoes pixel by pixel: all must be read in one direction", least);
  const turns = echoSeconds.map((seconds) => fatTurns(seconds, scan.resonanceHz));
  const seen = turns.map((turn) =>
    isInPhase(turn) ? "in phase" : isOpposed(turn) ? "opposed" : `${rounded(turn)} turns`,
  );
  if (method === "two-point" && !(seen.includes("in phase") && seen.includes("opposed")))
    refuse("method", method, `needs an echo in phase and one opposed; fat is ${seen.join(", ")}`, least);
  const steps = echoSeconds
    .slice(1, 3)
    .map((seconds, i) => fatTurns(seconds - echoSeconds[i]!, scan.resonanceHz));
  if (method === "three-point" && !(isInPhase(turns[0]!) && steps.every(isOpposed)))
    refuse(
      "method",
      method,
      `needs fat in phase, opposed and in phase; it is ${seen.slice(0, 3).join(", ")}`,
      least,
    );
}

/** Columns that are solved: the field of view and what fat displaces beyond it, as far as the margin reaches. */
function workColumns(layout: Layout, scan: ScanFacts): number {
  const inView = columnsInView(layout, scan);
  const fatPixels = chemicalShiftHz(FAT_MAIN_PEAK_PPM, scan.resonanceHz) / pixelBandwidthHz(layout, scan);
  const wanted = inView + 2 * Math.ceil(Math.abs(fatPixels) + EDGE_PIXELS);
  const available = axisLength(layout, "x");
  for (let columns = wanted; columns <= available; columns++) if (isSmooth(columns)) return columns;
  return available;
}

/** A length that transforms fast: even, of the factors 2, 3 and 5. */
function isSmooth(length: number): boolean {
  let rest = length;
  for (const factor of [2, 3, 5]) while (rest % factor === 0) rest /= factor;
  return rest === 1 && length % 2 === 0;
}

function mapPlans({ decay }: Params, layout: Layout, hasErrors: boolean): MapPlan[] {
  const signal = { unit: "as image.npy", layout, picture: "magnitude" } as const;
  return [
    ...fieldMapPlans(layout, hasErrors),
    { ...signal, name: "water", describe: "water, magnitude" },
    { ...signal, name: "fat", describe: "fat, magnitude" },
    {
      name: "fat-fraction",
      unit: "1",
      describe: "fat / (water + fat), 0 outside the object",
      layout,
      picture: "share",
    },
    {
      name: "fat-water-residual",
      unit: "as image.npy",
      describe: "what the fit leaves: root of the sum of squares over the echoes",
      layout,
    },
    ...(decay
      ? [
          {
            name: "r2star-per-second",
            unit: "1/s",
            describe: "R2*, common to water and fat",
            layout,
            picture: "magnitude" as const,
          },
        ]
      : []),
  ];
}

interface Solved {
  readonly images: FatWaterImages;
  readonly water: Float32Array;
  readonly fat: Float32Array;
  readonly residual: Float32Array;
  readonly decayPerSecond: Float32Array | undefined;
  readonly fraction: Float32Array;
  readonly mask: Uint8Array;
}

/** @param echoes combined images, [rows, model.length] each */
function solve(
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
  const isMagnitude = params.fit === "magnitude";
  const start = startField(engine, echoes, lines, rows, model, params, noiseDeviation);
  const images = separateFatWater(engine, lines, model, rows, start, {
    rounds: params["echo-phase"] ? 6 : params.decay ? 5 : 3,
    refineField: model.echoes > 2,
    smoothingPixels: params["smoothing-px"],
    noiseDeviation,
    fitDecay: params.decay,
    fitEchoPhase: params["echo-phase"],
    keepEchoes: isMagnitude,
  });
  for (const line of lines) engine.release(line);
  const mask = signalMask([images.water, images.fat], OBJECT_SHARE, noiseDeviation);
  if (!isMagnitude)
    return {
      images,
      water: magnitude(images.water),
      fat: magnitude(images.fat),
      residual: images.residual,
      decayPerSecond: images.decayPerSecond,
      fraction: fatFraction(images.water, images.fat, mask),
      mask,
    };
  const { echoSeconds } = model.timing;
  const signals = echoSeconds.flatMap((seconds) => fatSignal(spectrum, seconds));
  const fitted = fitMagnitudes(images.echoMagnitudes!, echoSeconds, signals, params.decay, mask);
  return {
    images,
    ...fitted,
    fraction: fitted.water.map((water, i) => (mask[i] ? fitted.fat[i]! / (water + fitted.fat[i]! || 1) : 0)),
    mask,
  };
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
    return coarseFatWaterField(engine, lines, model, rows, rangeHz(timing)).fieldHz;
  const mask = signalMask(echoes, OBJECT_SHARE, noiseDeviation);
  const size = { slices: 1, rows, columns: length };
  const { echoSeconds } = timing;
  const mainPeakAt = (seconds: number) => {
    const middle = Math.floor(length / 2);
    const e = echoSeconds.indexOf(seconds);
    return model.fat[2 * (e * length + middle)]!;
  };
  // the echo in which fat adds most to water, and the one in which it takes most away
  const byFat = [...echoSeconds.keys()].sort(
    (a, b) => mainPeakAt(echoSeconds[b]!) - mainPeakAt(echoSeconds[a]!),
  );
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
  return Float32Array.from({ length: image.length / 2 }, (_, i) =>
    Math.hypot(image[2 * i]!, image[2 * i + 1]!),
  );
}

/** The maps of one group while they are put together, cut to the field of view. */
class SpeciesValues {
  readonly field: FieldValues;
  readonly species = new Map<string, Float32Array>();

  constructor({ decay }: Params, hasErrors: boolean, pixels: number) {
    this.field = new FieldValues(pixels, hasErrors);
    for (const name of ["water", "fat", "fat-fraction", "fat-water-residual"])
      this.species.set(name, new Float32Array(pixels));
    if (decay) this.species.set("r2star-per-second", new Float32Array(pixels));
  }

  /** @param at pixel of the group's maps at which the image starts */
  add(solved: Solved, wide: number, columns: number, at: number): void {
    const cut = (map: Float32Array | Uint8Array) => cutColumns(map, wide, columns);
    const { fieldHz, standardErrorHz } = solved.images;
    this.field.set(at, cut(fieldHz), cut(solved.mask), standardErrorHz && cut(standardErrorHz));
    const put = (name: string, map: Float32Array | undefined) =>
      map && this.species.get(name)?.set(cut(map), at);
    put("water", solved.water);
    put("fat", solved.fat);
    put("fat-fraction", solved.fraction);
    put("fat-water-residual", solved.residual);
    put("r2star-per-second", solved.decayPerSecond);
  }
}

/** The middle columns of a real map. */
function cutColumns(map: Float32Array | Uint8Array, wide: number, columns: number): Float32Array {
  const first = cropStart(wide, columns);
  return Float32Array.from(
    { length: (map.length / wide) * columns },
    (_, i) => map[Math.floor(i / columns) * wide + first + (i % columns)]!,
  );
}
