/** The fixed order of array axes, slowest first. Those of length 1 are dropped from files (never y and x of 2-D data). */
export const AXES = ["repetition", "set", "phase", "contrast", "slice", "coil", "z", "y", "x"] as const;
export type Axis = (typeof AXES)[number];

/** The counters that number frames: one frame [coil, z, y, x] for each combination. */
export const FRAME_AXES = ["repetition", "set", "phase", "contrast", "slice"] as const;
export type FrameAxis = (typeof FRAME_AXES)[number];

/** A number for each frame axis: its length, or a counter along it. */
export type PerFrameAxis = Readonly<Record<FrameAxis, number>>;

/** Frames in all. */
export function frameCount(lengths: PerFrameAxis): number {
  return FRAME_AXES.reduce((product, axis) => product * lengths[axis], 1);
}

/** Index of the frame with these counters, C order over FRAME_AXES. */
export function frameIndex(lengths: PerFrameAxis, counters: PerFrameAxis): number {
  return FRAME_AXES.reduce((index, axis) => index * lengths[axis] + counters[axis], 0);
}

/** The axes along which k-space is sampled. */
export type SpatialAxis = "x" | "y" | "z";
export const SPATIAL_AXES = ["x", "y", "z"] as const;

export interface Xyz {
  readonly x: number;
  readonly y: number;
  readonly z: number;
}

/** Millimetres of pixel `index` of `count` along an axis with field of view `fovMm`: x = 0 lies at floor(count/2). */
export function pixelPositionMm(index: number, count: number, fovMm: number): number {
  return ((index - Math.floor(count / 2)) * fovMm) / count;
}

/** First kept index when `length` samples are cropped to `kept` about floor(length/2). */
export function cropStart(length: number, kept: number): number {
  return Math.floor(length / 2) - Math.floor(kept / 2);
}

/** First and last index of a range of samples or lines. */
export interface Extent {
  readonly first: number;
  readonly last: number;
}
