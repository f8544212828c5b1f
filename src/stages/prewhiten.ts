import { UsageError } from "../errors.js";
import { choleskyFactor, invertLower } from "../kernels/linear-algebra.js";
import { noiseCovarianceFactor } from "../physics/noise-statistics.js";
import type { ScanFacts } from "../physics/scan.js";
import { parseBySchema } from "./parameters.js";
import type { ReadoutStage } from "./stage.js";

type Params = Record<string, never>;

const schema = { type: "object", additionalProperties: false, properties: {} };

/**
 * Mix the channels so that their noise is uncorrelated with standard deviation 1 in each real and imaginary part.
 *
 * The covariance `(1/N) sum n n^H` of the noise readouts is carried to the image readouts by
 * `dwell_noise / dwell_image / relativeReceiverNoiseBandwidth`; with its Cholesky factor L the channels are
 * multiplied by `sqrt(2) L^-1` (E|n|^2 = 2). It acts across channels only, so it commutes exactly with all that acts
 * along the readout; it stands after `trim-oversampling` because there are half as many samples left.
 *
 * Source: Pruessmann et al. 2001, Magn Reson Med 46:638; scaling: Kellman and McVeigh 2005, Magn Reson Med 54:1439.
 */
export const prewhiten: ReadoutStage<Params> = {
  id: "prewhiten",
  kind: "readout",
  summary: "uncorrelated channels of unit noise, from the noise readouts",
  schema,
  parse: (raw) => parseBySchema<Params>("prewhiten", schema, raw),
  plan(layout, _params, scan) {
    whiteningMatrix(scan);
    const noise = scan.noise!;
    return {
      layout,
      physics: {
        "noise readouts": noise.readouts,
        "noise samples per channel": noise.samples,
        "standard error of a noise level, %": round(100 / (2 * Math.sqrt(noise.samples))),
        "relative receiver noise bandwidth": scan.relativeReceiverNoiseBandwidth,
        "covariance factor, noise to image": round(factor(scan)),
      },
    };
  },
  noise: (state) => ({ ...state, whitened: true }),
  run(lines, _params, context) {
    const { data, coils, samples } = lines;
    context.kernels.mixChannels(
      data,
      data,
      whiteningMatrix(context.scan),
      lines.lines,
      coils,
      coils,
      samples,
    );
    return lines;
  },
};

const matrices = new WeakMap<ScanFacts, Float32Array>();

/**
 * sqrt(2) L^-1, [channel, channel] interleaved.
 * @throws UsageError if there are no noise readouts, or too few samples for the number of channels
 */
export function whiteningMatrix(scan: ScanFacts): Float32Array {
  const known = matrices.get(scan);
  if (known) return known;
  const off = "Take the stage out: --set prewhiten=off";
  const { noise, channels } = scan;
  if (!noise)
    throw new UsageError({ field: "prewhiten" }, "the file has no noise readouts to whiten with", off);
  const scale = factor(scan);
  const covariance = noise.covariance.map((value) => value * scale);
  const lower = choleskyFactor(covariance, channels);
  if (!lower)
    throw new UsageError(
      { field: "prewhiten" },
      `the noise covariance of ${channels} channels from ${noise.samples} samples is singular`,
      `A dead or doubled channel, or too few samples. ${off}`,
    );
  const matrix = Float32Array.from(invertLower(lower, channels), (value) => Math.SQRT2 * value);
  matrices.set(scan, matrix);
  return matrix;
}

function factor(scan: ScanFacts): number {
  return noiseCovarianceFactor(
    scan.noise!.dwellSeconds,
    scan.dwellSeconds,
    scan.relativeReceiverNoiseBandwidth,
  );
}

function round(value: number): number {
  return Number(value.toPrecision(6));
}
