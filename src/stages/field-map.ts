import { UsageError } from "../errors.js";
import { measureField } from "../kernels/field-map.js";
import { warpLengths } from "../kernels/row-warp.js";
import { imageNoiseDeviation, signalMask } from "../kernels/signal-mask.js";
import {
  checkEchoes,
  columnsInView,
  EchoFrame,
  echoTiming,
  mapLayout,
  pixelBandwidthHz,
  pixelMm,
  rounded,
} from "./echo-frame.js";
import { FieldValues, fieldMapPlans, refuseSecondField } from "./field-values.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type Frame, type FrameStage } from "./stage.js";

interface Params {
  readonly "smoothing-px": number;
  readonly "mask-share": number;
  readonly "through-slices": boolean;
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
  },
};

/**
 * Off-resonance in Hz from two or more echoes: `-arg(I2 conj(I1)) / (2 pi dTE)` of the echoes combined with one set of
 * channel weights, the weighted least squares line over more than two, unwrapped in order of reliability, smoothed by its
 * weights, extended beyond the object, and carried from the displaced image to the object. The images pass unchanged.
 * Fat is not modelled: where there is much of it, take the field of `separate-fat-water`.
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
    checkEchoes("field-map", layout, scan, 2);
    refuseSecondField("field-map", maps);
    const { echoSeconds, pixelBandwidthHz } = echoTiming("field-map", layout, scan);
    const columns = columnsInView(layout, scan);
    return {
      layout,
      maps: fieldMapPlans(mapLayout(layout, scan), true),
      transformLengths: warpLengths(columns),
      workBytes: 8 * axisLength(layout, "y") * columns * (scan.channels + 2) * scan.lengths.contrast,
      physics: {
        "echo times, ms": echoSeconds.map((seconds) => rounded(seconds * 1e3)).join(", "),
        "wrap limit, Hz": rounded(1 / (2 * closestEchoes(echoSeconds))),
        "bandwidth per pixel, Hz": pixelBandwidthHz.map(rounded).join(", "),
        "smoothing, mm": rounded(params["smoothing-px"] * pixelMm(layout)),
      },
    };
  },
  run(frame, params, context) {
    const images = new EchoFrame(frame);
    const { scan } = context;
    const timing = echoTiming("field-map", frame.layout, scan);
    const columns = columnsInView(frame.layout, scan);
    const size = images.rows * columns;
    const values = new FieldValues(images.slices * images.partitions * size, true);
    let foldedCount = 0;
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
          noiseDeviation,
          mask: signalMask(echoes, params["mask-share"], noiseDeviation),
          smoothingPixels: params["smoothing-px"],
        },
      );
      foldedCount += measured.foldedCount;
      volume.forEach(([slice, z], i) => {
        const part = <A extends Float32Array | Uint8Array>(map: A) =>
          map.subarray(i * size, (i + 1) * size) as A;
        const { fieldHz, mask, standardErrorHz } = measured;
        values.set((slice * images.partitions + z) * size, part(fieldHz), part(mask), part(standardErrorHz));
      });
    }
    values.emit(context, pixelMm(frame.layout) / pixelBandwidthHz(frame.layout, scan));
    context.note({ name: "folded pixels", value: foldedCount });
    return frame;
  },
};

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
function closestEchoes(echoSeconds: readonly number[]): number {
  const sorted = [...echoSeconds].sort((a, b) => a - b);
  const closest = Math.min(...sorted.slice(1).map((seconds, i) => seconds - sorted[i]!));
  if (closest > 0) return closest;
  throw new UsageError(
    { field: "field-map", value: sorted.map((seconds) => seconds * 1e3).join(", ") },
    "two echoes have the same time",
    "Correct them: --set 'scan.echo-ms=[...]'",
  );
}
