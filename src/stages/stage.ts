import type { Kernels } from "../kernels/kernels.js";
import type { Axis, Extent, FrameAxis, PerFrameAxis, SpatialAxis, Xyz } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";

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
  /** Contrast counter of each line. */
  readonly echoes: Uint16Array;
  /** How far the resonance had drifted at each line, Hz; where a stage asked for it. */
  readonly driftHz?: Float64Array | undefined;
}

/** A map that a stage makes beside its result, announced by its plan: such as a field map. */
export interface MapPlan {
  /** File name without its ending, the unit in it: `field-hz`. */
  readonly name: string;
  readonly unit: string;
  /** What the values are, in a few words. */
  readonly describe: string;
  /** Real; a map is common to all echoes, so it has no contrast axis. */
  readonly layout: Layout;
  /** How its picture shows it; undefined where it has none. */
  readonly picture?: "magnitude" | "share" | "signed";
  /** What lies outside the field's mask says nothing: the picture leaves it out. */
  readonly insideOnly?: boolean;
}

/** The values of an announced map for one group of frames, in the order of its layout. */
export interface MapValues {
  readonly name: string;
  readonly data: Float32Array;
}

/** A number that a stage found in one group, such as how many pixels fold. */
export interface Finding {
  readonly stage: string;
  readonly name: string;
  readonly value: number;
}

/** An array that a recipe names as a file; the engine reads it. */
export interface InputArray {
  readonly file: string;
  readonly shape: readonly number[];
  /** Real values, C order. */
  readonly data: Float32Array | Float64Array;
  readonly sha256: string;
}

/** Arrays by the name that the recipe gives. */
export type InputArrays = ReadonlyMap<string, InputArray>;

/** What a stage may know when it is planned, beside its layout. */
export interface Given {
  readonly arrays: InputArrays;
  /** Maps that the stages before it hand out. */
  readonly maps: readonly MapPlan[];
}

/** What a running stage may use; stages never touch files. */
export interface StageContext {
  readonly scan: ScanFacts;
  readonly kernels: Kernels;
  /** Counters of the group's first frame; 0 along the axes that are together. */
  readonly counters: PerFrameAxis;
  /** The files that the stage's parameters name. */
  readonly arrays: InputArrays;
  /** Memory for samples, holding anything; what a stage takes and does not return it must give back. */
  allocate(floats: number): Float32Array;
  release(data: Float32Array): void;
  /** Hand out a map; its memory must not be the context's. */
  emit(map: MapValues): void;
  /** A map that an earlier stage has handed out for this group. */
  emitted(name: string): Float32Array | undefined;
  note(finding: Omit<Finding, "stage">): void;
}

/** What a stage will do to a layout: shape arithmetic and physics, no samples. `--explain` prints it. */
export interface StagePlan {
  readonly layout: Layout;
  /** Work memory beside input and output, bytes. */
  readonly workBytes?: number;
  /** Lengths that it transforms beside those of its input and output. */
  readonly transformLengths?: readonly number[];
  /** Numbers worth knowing, with their units in the name: `{ "bandwidth per pixel, Hz": 390.6 }`. */
  readonly physics: Readonly<Record<string, number | string>>;
  /** Maps that the stage will hand out for every group. */
  readonly maps?: readonly MapPlan[];
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
  /** Files (.npy) that the parameters name. */
  files?(params: P): readonly string[];
  /** @throws UsageError or InputError if the stage cannot work on this layout or scan */
  plan(layout: Layout, params: P, scan: ScanFacts, given: Given): StagePlan;
}

/** Works on single readouts as they are read, before they are placed. */
export interface ReadoutStage<P> extends StageBase<P> {
  readonly kind: "readout";
  run(lines: ReadoutLines, params: P, context: StageContext): ReadoutLines;
  /** Where the drift of each line is to come from: `navigators`, or the file of a table of Hz, one for each image readout. */
  drift?(params: P): string | undefined;
  /** How the noise state changes. */
  noise?(state: NoiseState, params: P): NoiseState;
}

/** Works on whole frames, or on several together. */
export interface FrameStage<P> extends StageBase<P> {
  readonly kind: Exclude<StageKind, "readout">;
  /** The frame axes that it needs at once; none if left out. */
  together?(params: P): readonly FrameAxis[];
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
