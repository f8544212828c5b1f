import { UsageError } from "../errors.js";
import type { Kernels } from "../kernels/kernels.js";
import { choleskyFactor } from "../kernels/linear-algebra.js";
import { addNoise, type RandomStream } from "../kernels/random.js";
import { noiseCovarianceFactor } from "../physics/noise-statistics.js";
import type { ScanFacts } from "../physics/scan.js";
import { axisLength, type Layout } from "../stages/stage.js";

/** How many pseudo-replicas, and which. Source: Robson et al. 2008, Magn Reson Med 60:895. */
export interface Replicas {
  readonly count: number;
  readonly seed: number;
}

/**
 * Add noise of the measured covariance to a group's placed samples, where lines were acquired, as much as is left after
 * averaging: unit noise after whitening, else that of the noise readouts.
 * @param data  [...together, coil, z, y, x] of the placed layout; x in k-space or in image space
 * @param counts how often each line was acquired
 * @throws UsageError without noise readouts
 */
export function addReplicaNoise(
  data: Float32Array,
  placed: Layout,
  counts: Uint16Array,
  scan: ScanFacts,
  isWhite: boolean,
  random: RandomStream,
  { transform }: Kernels,
): void {
  const coils = axisLength(placed, "coil");
  const columns = axisLength(placed, "x");
  const lines = axisLength(placed, "z") * axisLength(placed, "y");
  const factor = noiseFactorOf(scan, coils, isWhite);
  const { first, last } = placed.acquired.x;
  const samples = last - first + 1;
  const drawn = new Float32Array(2 * coils * samples);
  const line = new Float32Array(2 * coils * columns);
  for (let at = 0; at < counts.length; at++) {
    if (counts[at] === 0) continue;
    drawn.fill(0);
    addNoise(drawn, factor, coils, random, 1 / Math.sqrt(counts[at]!));
    line.fill(0);
    for (let c = 0; c < coils; c++)
      line.set(drawn.subarray(2 * c * samples, 2 * (c + 1) * samples), 2 * (c * columns + first));
    if (placed.inImage.includes("x"))
      transform.transformAxis({
        source: line,
        target: line,
        outer: coils,
        inner: 1,
        length: columns,
        inverse: true,
      });
    const frame = Math.floor(at / lines);
    for (let c = 0; c < coils; c++) {
      const to = 2 * ((frame * coils + c) * lines + (at % lines)) * columns;
      for (let i = 0; i < 2 * columns; i++) data[to + i]! += line[2 * c * columns + i]!;
    }
  }
}

/** L with `L z`, E|z|^2 = 1, the noise of one sample, [coil, coil] interleaved. */
function noiseFactorOf(scan: ScanFacts, coils: number, isWhite: boolean): Float64Array {
  const { noise } = scan;
  if (!noise)
    throw new UsageError(
      { field: "--noise-by", value: "replicas" },
      "the file has no noise readouts to draw noise from",
      "Use --noise-by propagation",
    );
  if (isWhite) {
    const unit = new Float64Array(2 * coils * coils);
    for (let c = 0; c < coils; c++) unit[2 * (c * coils + c)] = Math.SQRT2; // standard deviation 1 in each part
    return unit;
  }
  const { relativeReceiverNoiseBandwidth: share, dwellSeconds } = scan;
  const scale = noiseCovarianceFactor(noise.dwellSeconds, dwellSeconds, share);
  const lower = choleskyFactor(
    noise.covariance.map((value) => value * scale),
    coils,
  );
  if (lower) return lower;
  throw new UsageError(
    { field: "--noise-by", value: "replicas" },
    "the noise covariance is singular",
    "A dead or doubled channel, or too few noise samples",
  );
}
