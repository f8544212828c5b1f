import type { Extent, FrameAxis, SpatialAxis, Xyz } from "./layout.js";

/** Matrix and field of view of an encoded or a reconstructed space. */
export interface Space {
  readonly matrix: Xyz;
  readonly fovMm: Xyz;
}

/** Position and direction cosines of a slice, patient coordinates (LPS), mm: the centre of its field of view. */
export interface Pose {
  readonly positionMm: readonly number[];
  readonly readDir: readonly number[];
  readonly phaseDir: readonly number[];
  readonly sliceDir: readonly number[];
}

/** What the noise readouts say. */
export interface NoiseFacts {
  readonly readouts: number;
  /** Complex samples per channel. */
  readonly samples: number;
  readonly dwellSeconds: number;
  /** (1/N) sum n n^H over the noise readouts' samples, [channel, channel] interleaved re, im, row by row. */
  readonly covariance: Float64Array;
}

/** How a receiver's output must be read where its header may be wrong; the recipe's `scan`. */
export interface ScanOverrides {
  readonly group?: string;
  readonly encoding?: number;
  readonly duplicates: "mean" | "last";
  /** Axes whose readouts are averaged into one, besides `average` itself. */
  readonly averageOver: readonly FrameAxis[];
  readonly sampleTimeUs?: number;
  readonly resonanceHz?: number;
  readonly receiverNoiseBandwidth?: number;
  readonly echoMs?: readonly number[];
  readonly readoutPolarity: "header" | "forward" | "reverse" | "alternate";
  readonly centre: "header" | "measured";
  readonly conjugate: boolean;
  readonly alternateSign: boolean;
  /** The point (mm along read, phase, slice) that becomes the centre of the image. */
  readonly recentreMm: readonly [number, number, number];
}

/**
 * All that stages may know of a scan: what the header states and the readouts confirm, in SI units and mm.
 * Everything physical (bandwidth, shifts, positions) depends on it being true.
 */
export interface ScanFacts {
  readonly encoding: number;
  readonly trajectory: string;
  /** Encoded spatial dimensions: 1 for projections, 2, or 3. */
  readonly dimensions: 1 | 2 | 3;
  readonly encoded: Space;
  readonly reconstructed: Space;
  /** Counter value of the line at k = 0 along y and z; it lands at floor(N/2). */
  readonly center: { readonly y: number; readonly z: number };
  /** Acquired extent of each axis on the encoded grid: first and last index. */
  readonly acquired: Readonly<Record<SpatialAxis, Extent>>;
  /** Stored index of k = 0 where the recipe asks for the measured one, by readout direction. */
  readonly measuredCenter: { readonly forward?: number; readonly reverse?: number };
  readonly lengths: Readonly<Record<FrameAxis, number>>;
  readonly averages: number;
  readonly channels: number;
  readonly fieldT: number | undefined;
  readonly resonanceHz: number;
  readonly dwellSeconds: number;
  readonly relativeReceiverNoiseBandwidth: number;
  readonly noise: NoiseFacts | undefined;
  readonly echoTimesSeconds: readonly number[];
  readonly acceleration: { readonly y: number; readonly z: number };
  readonly calibrationMode: string | undefined;
  /** By slice counter; undefined where a slice has no readout. */
  readonly poses: readonly (Pose | undefined)[];
  /** Slice counters in spatial order along slice_dir. */
  readonly sliceOrder: readonly number[];
  /** Whether the readouts of each echo (contrast) run backward in time: one value per contrast, or mixed. */
  readonly polarity: readonly ("forward" | "reverse" | "mixed")[];
  readonly overrides: ScanOverrides;
}

/** A difference between what a file states and what it holds. A `problem` fails under `--strict`; a `remark` informs. */
export interface Discrepancy {
  readonly code: string;
  readonly severity: "problem" | "remark";
  readonly message: string;
}

export const DEFAULT_OVERRIDES: ScanOverrides = {
  duplicates: "mean",
  averageOver: [],
  readoutPolarity: "header",
  centre: "header",
  conjugate: false,
  alternateSign: false,
  recentreMm: [0, 0, 0],
};
