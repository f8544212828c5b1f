import { UsageError } from "../errors.js";
import { cropStart, SPATIAL_AXES, type SpatialAxis } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { parseBySchema } from "./parameters.js";
import {
  axisLength,
  type Frame,
  type FrameStage,
  floatCount,
  type Layout,
  type StageContext,
  strideAbout,
  withLength,
} from "./stage.js";

interface Params {
  readonly "readout-margin": "crop" | "keep";
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    "readout-margin": {
      description:
        "keep what the readout has beyond the reconstructed field of view, for a stage that moves pixels along x",
      enum: ["crop", "keep"],
      default: "crop",
    },
  },
};

/** How one axis goes from its pixels to the reconstructed matrix. */
interface Fit {
  readonly axis: SpatialAxis;
  readonly length: number;
  /** Pixels kept by the crop to the reconstructed field of view. */
  readonly kept: number;
  /** Reconstructed matrix size. */
  readonly matrix: number;
}

/**
 * From the encoded to the reconstructed matrix, per axis: crop the image to round(N x FOV_rec / FOV) about floor(N/2),
 * changing no value; then, in k-space, crop or zero-fill to the reconstructed matrix M and scale by sqrt(M / N), so
 * that a flat region keeps its level. The pixel size is that of the result. With the readout's margin kept, x has as
 * many pixels of that size as the encoded field of view holds.
 */
export const fitMatrix: FrameStage<Params> = {
  id: "fit-matrix",
  kind: "transform",
  summary: "crop to the reconstructed field of view, zero-fill or crop to its matrix",
  schema,
  parse: (raw) => parseBySchema<Params>("fit-matrix", schema, raw),
  plan(layout, params, scan) {
    if (layout.inImage.length < SPATIAL_AXES.length)
      throw new UsageError({ field: "fit-matrix" }, "needs an image", "Put inverse-fft before it");
    const fits = fitsOf(layout, params, scan);
    const fitted = fits.reduce((before, fit) => fittedLayout(before, fit), layout);
    return {
      layout: fitted,
      workBytes: 4 * floatCount(layout),
      physics: Object.fromEntries(
        fits
          .filter((fit) => fit.length > 1 || fit.matrix > 1)
          .map((fit) => [
            `${fit.axis}: pixels, cropped, matrix; pixel size, mm`,
            `${fit.length}, ${fit.kept}, ${fit.matrix}; ${Number((fitted.fovMm[fit.axis] / fit.matrix).toPrecision(7))}`,
          ]),
      ),
    };
  },
  run: (frame, params, context) =>
    fitsOf(frame.layout, params, context.scan).reduce((before, fit) => fitAxis(before, fit, context), frame),
};

function fitsOf(layout: Layout, params: Params, scan: ScanFacts): Fit[] {
  return SPATIAL_AXES.map((axis) => {
    const length = axisLength(layout, axis);
    const kept = Math.min(length, Math.round((length * scan.reconstructed.fovMm[axis]) / layout.fovMm[axis]));
    // A 2-D slice and a projection have one pixel along what they do not encode, whatever the field of view says.
    const encoded = scan.encoded.matrix[axis] > 1;
    if (axis === "x" && params["readout-margin"] === "keep")
      return { axis, length, ...withMargin(length, kept, scan.reconstructed.matrix.x) };
    return { axis, length, kept: encoded ? kept : 1, matrix: encoded ? scan.reconstructed.matrix[axis] : 1 };
  });
}

/** The most pixels of a row that a whole number of the result's pixels covers. */
function withMargin(length: number, kept: number, matrix: number): Pick<Fit, "kept" | "matrix"> {
  const step = kept / greatestCommonDivisor(kept, matrix);
  const wide = Math.floor(length / step) * step;
  return { kept: wide, matrix: (wide * matrix) / kept };
}

function greatestCommonDivisor(a: number, b: number): number {
  return b === 0 ? a : greatestCommonDivisor(b, a % b);
}

function fittedLayout(layout: Layout, fit: Fit): Layout {
  const fov = (layout.fovMm[fit.axis] * fit.kept) / fit.length;
  return { ...withLength(layout, fit.axis, fit.matrix), fovMm: { ...layout.fovMm, [fit.axis]: fov } };
}

function fitAxis(frame: Frame, fit: Fit, context: StageContext): Frame {
  const { axis, length, kept, matrix } = fit;
  if (kept === length && matrix === kept) return frame;
  const layout = fittedLayout(frame.layout, fit);
  const cropped = kept === length ? frame.data : crop(frame, fit, context);
  if (matrix === kept) {
    return { ...frame, data: cropped, layout };
  }
  const { outer, inner } = strideAbout(frame.layout, axis);
  const { transform } = context.kernels;
  const common = Math.min(kept, matrix);
  const spectrum = context.allocate(2 * outer * common * inner);
  transform.transformAxis({
    source: cropped,
    target: spectrum,
    outer,
    inner,
    length: kept,
    outputLength: common,
    inverse: false,
  });
  if (cropped !== frame.data) context.release(cropped);
  const out = context.allocate(2 * outer * matrix * inner);
  const scale = Math.sqrt(matrix / kept);
  transform.transformAxis({
    source: spectrum,
    target: out,
    outer,
    inner,
    length: matrix,
    inputLength: common,
    inverse: true,
    scale,
  });
  context.release(spectrum);
  // Noise: zero-filling keeps a pixel's variance, cutting k-space lowers it by M / N.
  const gain = frame.noise.gain * Math.sqrt(Math.min(1, matrix / kept));
  return { ...frame, data: out, layout, noise: { ...frame.noise, gain } };
}

function crop(frame: Frame, fit: Fit, context: StageContext): Float32Array {
  const { outer, length, inner } = strideAbout(frame.layout, fit.axis);
  const out = context.allocate(2 * outer * fit.kept * inner);
  const start = cropStart(length, fit.kept);
  const row = 2 * fit.kept * inner;
  for (let o = 0; o < outer; o++) {
    const from = 2 * (o * length + start) * inner;
    out.set(frame.data.subarray(from, from + row), o * row);
  }
  return out;
}
