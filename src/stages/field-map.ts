import { InputError, UsageError } from "../errors.js";
import { coarseFieldLengths } from "../kernels/fat-water-field.js";
import { type FatWaterModel, fatWaterModel, separationNoise } from "../kernels/fat-water-model.js";
import { fatAsFieldHz, measureField } from "../kernels/field-map.js";
import { warpLengths } from "../kernels/row-warp.js";
import { imageNoiseDeviation, signalMask } from "../kernels/signal-mask.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  checkEchoes,
  columnsInView,
  displacementMmPerHz,
  EchoFrame,
  type EchoTiming,
  echoTiming,
  mapLayout,
  pixelMm,
  rounded,
  sameButFor,
} from "./echo-frame.js";
import { MOST_NOISE, spectralLines } from "./fat-water-parameters.js";
import { FieldValues, FOLDED_IN_MAP, fieldMapPlans, NOT_WATER, refuseSecondField } from "./field-values.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type Frame, type FrameStage } from "./stage.js";

interface Params {
  readonly "smoothing-px": number;
  readonly "mask-share": number;
  readonly "through-slices": boolean;
  readonly fat: "check" | "absent";
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    "smoothing-px": {
      description: "standard deviation of the window that smooths the map, pixels; 0 for none",
      type: "number",
      minimum: 0,
      default: 2,
    },
    "mask-share": {
      description: "signal below this share of the bright level is not measured",
      type: "number",
      exclusiveMinimum: 0,
      maximum: 1,
      default: 0.1,
    },
    "through-slices": {
      description: "unwrap through neighbouring slices as well; all of them are then in memory at once",
      type: "boolean",
      default: true,
    },
    fat: {
      description:
        "check: leave pixels of fat out, where three or more echoes tell it from water (else it counts as field); absent: there is none",
      enum: ["check", "absent"],
      default: "check",
    },
  },
};

/**
 * Off-resonance in Hz from two or more echoes: `-arg(I2 conj(I1)) / (2 pi dTE)` of the echoes combined with one set of
 * channel weights, the weighted least squares line over more than two, unwrapped in order of reliability, smoothed by its
 * weights, extended beyond the object, and carried from the displaced image to the object. The images pass unchanged.
 * The map is of water. Three or more echoes show where there is fat (six peaks): it is left out, and the field there
 * continues its surroundings. Of two echoes, or of those in which fat looks like water, fat counts as field.
 *
 * Source: Jezzard and Balaban 1995, Magn Reson Med 34:65; channels: Walsh et al. 2000, Magn Reson Med 43:682.
 */
export const fieldMap: FrameStage<Params> = {
  id: "field-map",
  kind: "series",
  together: (params) => (params["through-slices"] ? ["contrast", "slice"] : ["contrast"]),
  summary: "off-resonance in Hz from two or more echoes, in the object's coordinates",
  schema,
  parse: (raw) => parseBySchema<Params>("field-map", schema, raw),
  plan(layout, params, scan, { maps }) {
    checkEchoes("field-map", layout, scan, 2, "A map from elsewhere will do: recon --undisplace FIELD.npy");
    refuseSecondField("field-map", maps);
    const { echoSeconds, pixelBandwidthHz } = echoTiming("field-map", layout, scan);
    const columns = columnsInView(layout, scan);
    const fat = fatOf(params, { echoSeconds, pixelBandwidthHz }, scan, columns);
    return {
      layout,
      maps: fieldMapPlans(mapLayout(layout, scan), true),
      transformLengths: [...warpLengths(columns), ...coarseFieldLengths(columns)],
      workBytes: 8 * axisLength(layout, "y") * columns * (scan.channels + 4) * scan.lengths.contrast,
      physics: {
        "echo times, ms": echoSeconds.map((seconds) => rounded(seconds * 1e3)).join(", "),
        [WRAP_LIMIT]: rounded(1 / (2 * closestGapSeconds(echoSeconds))),
        "bandwidth per pixel, Hz": pixelBandwidthHz.map(rounded).join(", "),
        ...sameButFor({ echoSeconds, pixelBandwidthHz }),
        [FAT_IN_MAP]: fat.does,
        ...(fat.does === "counts as field" && { [FAT_AS_FIELD]: rounded(fat.asFieldHz) }),
        "smoothing, mm": rounded(params["smoothing-px"] * pixelMm(layout)),
      },
    };
  },
  run(frame, params, context) {
    const images = new EchoFrame(frame);
    const { scan } = context;
    const timing = echoTiming("field-map", frame.layout, scan);
    const columns = columnsInView(frame.layout, scan);
    const fat = fatOf(params, timing, scan, columns);
    const size = images.rows * columns;
    const values = new FieldValues(images.slices * images.partitions * size, true);
    const counts = { folded: 0, notWater: 0, kept: 0 };
    for (const volume of volumesOf(images, scan.sliceOrder)) {
      const echoes = joined(
        volume.map(([slice, z]) => images.combined(slice, z, columns, context.kernels.transform)),
      );
      const noiseDeviation = noiseOf(frame, echoes[0]!, images.rows, columns);
      const measured = measureField(
        context.kernels.transform,
        echoes,
        { slices: volume.length, rows: images.rows, columns },
        {
          ...timing,
          ...(fat.model && { fat: { model: fat.model, asFieldHz: fat.asFieldHz } }),
          noiseDeviation,
          mask: signalMask(echoes, params["mask-share"], noiseDeviation),
          smoothingPixels: params["smoothing-px"],
        },
      );
      counts.folded += measured.foldedCount;
      counts.notWater += measured.notWaterCount;
      counts.kept += measured.keptCount;
      volume.forEach(([slice, z], i) => {
        const part = <A extends Float32Array | Uint8Array>(map: A) =>
          map.subarray(i * size, (i + 1) * size) as A;
        const { fieldHz, mask, standardErrorHz } = measured;
        values.set((slice * images.partitions + z) * size, part(fieldHz), part(mask), part(standardErrorHz));
      });
    }
    values.emit(context, displacementMmPerHz(frame.layout, scan));
    context.note({ name: FOLDED_IN_MAP, value: counts.folded });
    if (images.echoes < 3) return frame;
    refuseLeftovers(counts);
    context.note({ name: NOT_WATER, value: counts.notWater });
    return frame;
  },
};

/** Physics of a plan: fields beyond this from their surroundings are ambiguous. */
export const WRAP_LIMIT = "wrap limit, Hz";
/** Physics of a plan: what fat does to its map. */
export const FAT_IN_MAP = "fat";
/** Physics of a plan whose map takes fat for field: by how much. */
export const FAT_AS_FIELD = "fat counts as field, Hz";

/** Turns of fat between the closest echoes, whole ones aside, below which it cannot be told from water by its field. */
const LEAST_TURN = 1 / 8;
/** What fat does in these echoes, and the model to find it with, where they tell it from water. */
function fatOf({ fat }: Params, timing: EchoTiming, scan: ScanFacts, columns: number): FatHere {
  const lines = spectralLines({ spectrum: "six-peak" }, scan.resonanceHz);
  const asFieldHz = fatAsFieldHz(timing.echoSeconds, lines);
  if (fat === "absent") return { does: "taken as absent", asFieldHz };
  const isApart = Math.abs(asFieldHz) > LEAST_TURN / closestGapSeconds(timing.echoSeconds);
  if (timing.echoSeconds.length < 3 || !isApart) return { does: "counts as field", asFieldHz };
  const model = fatWaterModel(timing, lines, columns);
  return separationNoise(model) < MOST_NOISE
    ? { does: "left out", asFieldHz, model }
    : { does: "counts as field", asFieldHz };
}

interface FatHere {
  readonly does: "left out" | "counts as field" | "taken as absent";
  readonly asFieldHz: number;
  readonly model?: FatWaterModel;
}

/** Of the pixels with signal this share must be of water for a map that is of use. */
const LEAST_SHARE = 0.1;

/** @throws InputError where next to nothing follows the map's one species */
function refuseLeftovers({ kept, notWater }: { kept: number; notWater: number }): void {
  if (kept >= LEAST_SHARE * (kept + notWater)) return;
  throw new InputError(
    { field: "field-map", value: `${kept} of ${kept + notWater} pixels with signal` },
    "so few follow one species, water, from echo to echo",
    "Take separate-fat-water where there is fat, with separate-fat-water.echo-phase=true where echoes are read in turns; or set field-map.fat=absent",
  );
}

/** Which images are unwrapped together, [slice, z] each: slices in spatial order, or the partitions of a slab. */
function volumesOf(images: EchoFrame, sliceOrder: readonly number[]): [slice: number, z: number][][] {
  const slices = images.slices > 1 ? sliceOrder : [0];
  if (images.partitions === 1) return [slices.map((slice) => [slice, 0])];
  const partitions = Array.from({ length: images.partitions }, (_, z) => z);
  return slices.map((slice) => partitions.map((z) => [slice, z]));
}

/** Images of [echo] each, joined to volumes: for each echo [image, y, x]. */
function joined(images: readonly (readonly Float32Array[])[]): Float32Array[] {
  const [first] = images;
  if (images.length === 1) return [...first!];
  return first!.map((image, echo) => {
    const out = new Float32Array(images.length * image.length);
    images.forEach((echoes, i) => void out.set(echoes[echo]!, i * image.length));
    return out;
  });
}

/** Noise of the real (and the imaginary) part of a combined image: known after whitening, else from the image. */
export function noiseOf(frame: Frame, image: Float32Array, rows: number, columns: number): number {
  if (frame.noise.whitened) return frame.noise.gain;
  return imageNoiseDeviation(image.subarray(0, 2 * rows * columns), rows, columns);
}

/** Seconds between the two echoes that are nearest in time. @throws UsageError where two have the same time */
function closestGapSeconds(echoSeconds: readonly number[]): number {
  const sorted = [...echoSeconds].sort((a, b) => a - b);
  const closest = Math.min(...sorted.slice(1).map((seconds, i) => seconds - sorted[i]!));
  if (closest > 0) return closest;
  throw new UsageError(
    { field: "field-map", value: sorted.map((seconds) => seconds * 1e3).join(", ") },
    "two echoes have the same time",
    "Correct them: --set 'scan.echo-ms=[...]'",
  );
}
