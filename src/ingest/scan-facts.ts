import { InputError } from "../errors.js";
import { type Extent, FRAME_AXES, type FrameAxis } from "../physics/layout.js";
import type { NoiseFacts, Pose, ScanFacts, ScanOverrides } from "../physics/scan.js";
import { lineExtent } from "./coverage.js";
import type { Limits, RawHeader } from "./header.js";
import type { CenterEvidence, ScanIndex } from "./scan-index.js";

/**
 * What stages may know of the scan: the header, completed and confirmed by the readouts.
 * Axis lengths come from the header's encodingLimits, else from the counters.
 * @throws InputError if there is no image readout, or dwell times differ
 */
export function scanFacts(
  file: string,
  header: RawHeader,
  index: ScanIndex,
  overrides: ScanOverrides,
): ScanFacts {
  const encoding = index.encoding;
  if (index.roles.image === 0)
    throw new InputError(
      { file },
      "holds no image readouts in this encoding",
      "Choose another with --encoding",
    );
  const lengths = {} as Record<FrameAxis, number>;
  for (const axis of FRAME_AXES) {
    const counted = index.ranges[axis].maximum + 1;
    lengths[axis] = overrides.averageOver.includes(axis)
      ? 1
      : (encoding.limits[axis]?.maximum ?? counted - 1) + 1;
  }
  const { matrix } = encoding.encoded;
  const center = {
    y: centerCounter(encoding.limits.kspace_encoding_step_1, index.ranges.kspace_encode_step_1, matrix.y),
    z: centerCounter(encoding.limits.kspace_encoding_step_2, index.ranges.kspace_encode_step_2, matrix.z),
  };
  const measured = overrides.centre === "measured" ? measuredCenters(index) : {};
  return {
    encoding: overrides.encoding ?? 0,
    trajectory: encoding.trajectory,
    dimensions: matrix.z > 1 ? 3 : matrix.y > 1 ? 2 : 1,
    encoded: encoding.encoded,
    reconstructed: encoding.reconstructed,
    center,
    acquired: {
      x: readoutExtent(index, measured, matrix.x),
      y: lineExtent(index, "y", center.y, matrix.y),
      z: lineExtent(index, "z", center.z, matrix.z),
    },
    measuredCenter: measured,
    lengths,
    averages: index.ranges.average.maximum + 1,
    channels: index.channels,
    fieldT: header.fieldT,
    resonanceHz: overrides.resonanceHz ?? header.resonanceHz,
    dwellSeconds:
      overrides.sampleTimeUs === undefined ? oneDwell(file, index) : overrides.sampleTimeUs * 1e-6,
    relativeReceiverNoiseBandwidth:
      overrides.receiverNoiseBandwidth ?? header.relativeReceiverNoiseBandwidth ?? 1,
    noise: noiseFacts(index),
    echoTimesSeconds: overrides.echoMs?.map((ms) => ms * 1e-3) ?? header.echoTimesSeconds,
    acceleration: encoding.acceleration,
    calibrationMode: encoding.calibrationMode,
    poses: Array.from({ length: lengths.slice }, (_, slice) => index.poses[slice]),
    sliceOrder: sliceOrder(index.poses, lengths.slice),
    polarity: Array.from(index.polarity, (count) =>
      !count || count.reverse === 0 ? "forward" : count.forward === 0 ? "reverse" : "mixed",
    ),
    overrides,
  };
}

/** Counter of the line at k = 0: the limits' centre; without limits the middle of a full matrix, else of the lines seen. */
function centerCounter(
  limits: Limits | undefined,
  range: { minimum: number; maximum: number },
  lines: number,
): number {
  if (limits) return limits.center;
  if (range.maximum < lines) return Math.floor(lines / 2);
  return Math.floor((range.minimum + range.maximum + 1) / 2);
}

function oneDwell(file: string, index: ScanIndex): number {
  const [dwell, other] = index.dwellSeconds;
  if (other !== undefined)
    throw new InputError(
      { file, field: "sample_time_us", value: index.dwellSeconds.map((s) => s * 1e6).join(", ") },
      "must be the same in all image readouts of one encoding",
      "Give the right one with scan: { sample-time-us } in the recipe",
    );
  return dwell!;
}

function noiseFacts(index: ScanIndex): NoiseFacts | undefined {
  if (!index.noise) return undefined;
  const { readouts, samples, dwellSeconds, sum } = index.noise;
  return { readouts, samples, dwellSeconds, covariance: sum.map((value) => value / samples) };
}

/** Distance of a slice along the slice direction of the first known one, mm. */
export function slicePositionMm(pose: Pose, normal: readonly number[]): number {
  return pose.positionMm.reduce((total, value, i) => total + value * normal[i]!, 0);
}

/** Slice counters by position along slice_dir, not by counter; slices never seen keep the end. */
function sliceOrder(poses: readonly (Pose | undefined)[], slices: number): number[] {
  const normal = poses.find((pose) => pose !== undefined)?.sliceDir ?? [0, 0, 1];
  const position = (slice: number) => {
    const pose = poses[slice];
    return pose ? slicePositionMm(pose, normal) : Number.POSITIVE_INFINITY;
  };
  const order = Array.from({ length: slices }, (_, slice) => slice);
  return order.sort((a, b) => (position(a) === position(b) ? a - b : position(a) - position(b)));
}

/** Stored index where the energy of the readouts of one polarity peaks. */
export function measuredCenter(evidence: CenterEvidence): number {
  return evidence.energy.reduce((best, value, i) => (value > evidence.energy[best]! ? i : best), 0);
}

function measuredCenters(index: ScanIndex): ScanFacts["measuredCenter"] {
  const { forward, reverse } = index.centers;
  return {
    ...(forward && { forward: measuredCenter(forward) }),
    ...(reverse && { reverse: measuredCenter(reverse) }),
  };
}

/** The acquired samples on the encoded readout, over both readout directions. */
function readoutExtent(index: ScanIndex, measured: ScanFacts["measuredCenter"], samples: number): Extent {
  const middle = Math.floor(samples / 2);
  let first = middle;
  let last = middle;
  for (const side of ["forward", "reverse"] as const) {
    const evidence = index.centers[side];
    if (!evidence) continue;
    const moved = (measured[side] ?? evidence.stated) - evidence.stated;
    const shift = side === "forward" ? moved : -moved;
    first = Math.min(first, middle - evidence.below - shift);
    last = Math.max(last, middle + evidence.above - shift);
  }
  return { first: Math.max(0, first), last: Math.min(samples - 1, last) };
}
