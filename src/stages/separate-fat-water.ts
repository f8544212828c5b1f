import { UsageError } from "../errors.js";
import { fieldRangeHz } from "../kernels/echo-times.js";
import { coarseFieldLengths } from "../kernels/fat-water-field.js";
import { fatWaterModel, separationNoise } from "../kernels/fat-water-model.js";
import { warpLengths } from "../kernels/row-warp.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM } from "../physics/chemical-shift.js";
import { cropStart } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  checkEchoes,
  columnsInView,
  displacementMmPerHz,
  EchoFrame,
  echoTiming,
  mapLayout,
  pixelBandwidthHz,
  rounded,
  sameButFor,
} from "./echo-frame.js";
import { checkMethod, ID, MOST_NOISE, type Params, schema, spectralLines } from "./fat-water-parameters.js";
import { type Solved, solve } from "./fat-water-solution.js";
import { noiseOf } from "./field-map.js";
import { FieldValues, FOLDED_IN_MAP, fieldMapPlans, refuseSecondField } from "./field-values.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type FrameStage, type Layout, type MapPlan } from "./stage.js";

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
    const mend =
      scan.lengths.contrast === 2
        ? "With fat in phase in one echo and opposed in the other: --set separate-fat-water.method=two-point"
        : "One echo does not tell fat from water";
    checkEchoes(ID, layout, scan, params.method === "two-point" ? 2 : 3, mend);
    refuseSecondField(ID, maps);
    const timing = echoTiming(ID, layout, scan);
    checkMethod(params, timing, scan);
    const columns = workColumns(layout, scan);
    const model = fatWaterModel(timing, spectralLines(params, scan.resonanceHz), columns);
    const noise = separationNoise(model);
    if (noise > MOST_NOISE)
      throw new UsageError(
        { field: ID, value: `${timing.echoSeconds.map((seconds) => rounded(seconds * 1e3)).join(", ")} ms` },
        `these echo times hardly tell fat from water: noise of ${noise.toFixed(1)} times that of one echo`,
        "Fat must turn by different parts of a turn from echo to echo; without fat, field-map will do",
      );
    return {
      layout,
      maps: mapPlans(params, mapLayout(layout, scan), scan.lengths.contrast > 2),
      transformLengths: [...warpLengths(columns), ...coarseFieldLengths(columns)],
      workBytes: 8 * axisLength(layout, "y") * columns * (scan.channels + 8) * scan.lengths.contrast,
      physics: {
        "echo times, ms": timing.echoSeconds.map((seconds) => rounded(seconds * 1e3)).join(", "),
        "bandwidth per pixel, Hz": timing.pixelBandwidthHz.map(rounded).join(", "),
        "fat, main peak, Hz": rounded(chemicalShiftHz(FAT_MAIN_PEAK_PPM, scan.resonanceHz)),
        "fields considered, Hz":
          params.method === "least-squares"
            ? `within ${rounded(fieldRangeHz(timing.echoSeconds, timing.pixelBandwidthHz))} of the mean slope`
            : "any, unwrapped",
        ...sameButFor(timing),
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
        const echoes = images.combined(slice, z, wide, transform);
        const noiseDeviation = noiseOf(frame, echoes[0]!, images.rows, wide);
        const solved = solve(transform, echoes, images.rows, model, spectrum, params, noiseDeviation);
        context.note({ name: FOLDED_IN_MAP, value: solved.foldedCount });
        out.add(solved, wide, columns, (slice * images.partitions + z) * images.rows * columns);
        if (!params["echo-phase"]) continue;
        context.note({ name: "odd/even echo phase, rad", value: solved.echoPhase.radians });
        context.note({
          name: "odd/even echo phase, rad per pixel",
          value: solved.echoPhase.radiansPerPixel,
        });
      }
    out.field.emit(context, displacementMmPerHz(frame.layout, scan));
    for (const [name, data] of out.species) context.emit({ name, data });
    return frame;
  },
};

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
  const signal = { unit: "signal", layout, picture: "magnitude" } as const;
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
      unit: "signal",
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
    const { fieldHz, mask, standardErrorHz } = solved;
    this.field.set(at, cut(fieldHz), cut(mask), standardErrorHz && cut(standardErrorHz));
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
  const out = new Float32Array((map.length / wide) * columns);
  for (let from = first, to = 0; to < out.length; from += wide, to += columns)
    out.set(map.subarray(from, from + columns), to);
  return out;
}
