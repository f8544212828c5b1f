import type { Kernels } from "../kernels/kernels.js";
import type { Axis, Extent, FrameAxis, SpatialAxis, Xyz } from "../physics/layout.js";
import type { Discrepancy, ScanFacts } from "../physics/scan.js";

/** Where a stage stands in the flow: each kind gets what the kind before it made. */
export const STAGE_KINDS = ["readout", "k-space", "transform", "series", "combine"] as const;
export type StageKind = (typeof STAGE_KINDS)[number];

/** Shape and meaning of an array between two stages: all that can be known before a sample is read. */
export interface Layout {
  /**
   * In the order of AXES: the frame axes that the recipe needs together, `coil` until it is combined, and `z`, `y`,
   * `x` always, those of length 1 included.
   */
  readonly axes: readonly Axis[];
  readonly shape: readonly number[];
  readonly kind: "complex" | "real";
  /** Field of view of the spatial axes, mm. */
  readonly fovMm: Xyz;
  /** Spatial axes that are in image space already; the others are in k-space. */
  readonly inImage: readonly SpatialAxis[];
  /** Acquired extent of the spatial axes on the k-space grid that they have, or had last. */
  readonly acquired: Readonly<Record<SpatialAxis, Extent>>;
}

/** How often each line of a frame was acquired. */
export interface Sampling {
  /** [...frame axes, z, y]; 0 where a line was not acquired and is zero. */
  readonly counts: Uint16Array;
}

/** What became of the receiver's noise so far. */
export interface NoiseState {
  /** After whitening the noise of each real and imaginary part has standard deviation `gain`; before, gain times the receiver's. */
  readonly whitened: boolean;
  readonly gain: number;
}

/**
 * One array on its way, C order; interleaved re, im where its layout is complex.
 * A stage owns the frame that it is given: it may change `data` in place and return it, or take new memory from the
 * context (the engine then gives the old back).
 */
export interface Frame {
  readonly data: Float32Array;
  readonly layout: Layout;
  readonly sampling: Sampling | undefined;
  readonly noise: NoiseState;
}

/** Readouts on their way, before they are placed: [line, coil, x]; the layout is that of the frame they will fill. */
export interface ReadoutLines {
  readonly data: Float32Array;
  readonly lines: number;
  readonly samples: number;
  readonly coils: number;
  /** 1 for each line that was read backward in time (its samples are in the order of rising k by now), else 0. */
  readonly backward: Uint8Array;
}

/** An array that a stage makes beside its result, such as a field map. */
export interface SideOutput {
  readonly name: string;
  readonly data: Float32Array;
  readonly axes: readonly Axis[];
  readonly shape: readonly number[];
  readonly unit: string;
}

/** What a running stage may use; stages never touch files. */
export interface StageContext {
  readonly scan: ScanFacts;
  readonly kernels: Kernels;
  /** Memory for samples, holding anything; what a stage takes and does not return it must give back. */
  allocate(floats: number): Float32Array;
  release(data: Float32Array): void;
  emit(output: SideOutput): void;
}

/** What a stage will do to a layout: shape arithmetic and physics, no samples. `--explain` prints it. */
export interface StagePlan {
  readonly layout: Layout;
  /** Work memory beside input and output, bytes. */
  readonly workBytes?: number;
  /** Numbers worth knowing, with their units in the name: `{ "bandwidth per pixel, Hz": 390.6 }`. */
  readonly physics: Readonly<Record<string, number | string>>;
  readonly discrepancies?: readonly Discrepancy[];
}

interface StageBase<P> {
  /** The name in recipes, files, tests and help. */
  readonly id: string;
  /** One line for help. */
  readonly summary: string;
  /** JSON Schema of the parameters; the only home of their defaults. */
  readonly schema: object;
  /** @throws UsageError for an unknown key or a value that the schema or the stage refuses */
  parse(raw: unknown): P;
  /** @throws UsageError or InputError if the stage cannot work on this layout or scan */
  plan(layout: Layout, params: P, scan: ScanFacts): StagePlan;
}

/** Works on single readouts as they are read, before they are placed. */
export interface ReadoutStage<P> extends StageBase<P> {
  readonly kind: "readout";
  run(lines: ReadoutLines, params: P, context: StageContext): ReadoutLines;
  /** How the noise state changes. */
  noise?(state: NoiseState, params: P): NoiseState;
}

/** Works on whole frames, or on several together. */
export interface FrameStage<P> extends StageBase<P> {
  readonly kind: Exclude<StageKind, "readout">;
  /** The frame axes that it needs at once. */
  readonly together: readonly FrameAxis[];
  run(frame: Frame, params: P, context: StageContext): Frame;
}

export type Stage<P = unknown> = ReadoutStage<P> | FrameStage<P>;

/** Complex or real values in an array of this layout. */
export function valueCount(layout: Layout): number {
  return layout.shape.reduce((product, length) => product * length, 1);
}

/** Floats in an array of this layout. */
export function floatCount(layout: Layout): number {
  return valueCount(layout) * (layout.kind === "complex" ? 2 : 1);
}

export function axisLength(layout: Layout, axis: Axis): number {
  const at = layout.axes.indexOf(axis);
  return at < 0 ? 1 : layout.shape[at]!;
}

/** The same layout with another length of one axis. */
export function withLength(layout: Layout, axis: Axis, length: number): Layout {
  return { ...layout, shape: layout.shape.map((old, i) => (layout.axes[i] === axis ? length : old)) };
}

/** Values before and after one step along an axis: the array is [outer, length, inner]. */
export function strideAbout(layout: Layout, axis: Axis): { outer: number; length: number; inner: number } {
  const at = layout.axes.indexOf(axis);
  const product = (lengths: readonly number[]) => lengths.reduce((total, length) => total * length, 1);
  return {
    outer: product(layout.shape.slice(0, at)),
    length: layout.shape[at]!,
    inner: product(layout.shape.slice(at + 1)),
  };
}
