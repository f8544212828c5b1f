import { UsageError } from "../errors.js";
import {
  type Axis,
  FRAME_AXES,
  type FrameAxis,
  frameCount,
  frameIndex,
  type PerFrameAxis,
  SPATIAL_AXES,
} from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { refuseUnsupported } from "../recipe/default-recipe.js";
import type { Recipe } from "../recipe/recipe.js";
import { STAGES, stageById } from "../stages/registry.js";
import {
  axisLength,
  floatCount,
  type InputArray,
  type InputArrays,
  type Layout,
  type MapPlan,
  STAGE_KINDS,
  type Stage,
  type StagePlan,
} from "../stages/stage.js";
import { readArrays } from "./input-arrays.js";

/** One stage of a plan: what it gets, what it makes, and why it is there. */
export interface PlannedStage {
  readonly stage: Stage;
  readonly params: unknown;
  readonly input: Layout;
  readonly output: Layout;
  readonly physics: StagePlan["physics"];
  readonly bytesIn: number;
  readonly bytesOut: number;
  readonly workBytes: number;
  readonly transformLengths: readonly number[];
  readonly reason: string;
  readonly maps: readonly MapPlan[];
  /** The files that its parameters name. */
  readonly arrays: InputArrays;
}

/** A recipe worked out for a scan, before any sample is processed: every shape, byte count and physical number. */
export interface Plan {
  readonly stages: readonly PlannedStage[];
  /** Where the drift of the resonance is to come from, if a stage asks for it: `navigators`, or a table. */
  readonly drift: "navigators" | InputArray | undefined;
  /** Frame axes that are processed at once; a group is one combination of the others. */
  readonly together: readonly FrameAxis[];
  /** Number of groups, frames in a group, frames in all. */
  readonly groups: number;
  readonly framesPerGroup: number;
  /** The k-space that readouts are placed into: the layout after the readout stages. */
  readonly placed: Layout;
  /** The last layout with channels still apart, and the result. */
  readonly coils: Layout;
  readonly result: Layout;
}

/**
 * Work a recipe out for a scan.
 * @param reasons why a stage is in a default recipe; stages that the user added have none
 * @throws UsageError for a recipe that is out of order or lacks what an image needs; InputError for a trajectory that
 * is not supported
 */
export function planRecipe(
  scan: ScanFacts,
  recipe: Recipe,
  reasons: ReadonlyMap<string, string> = new Map(),
): Plan {
  refuseUnsupported(scan);
  const parsed = recipe.stages.map(({ id, parameters }) => {
    const stage = stageById(id)!;
    return { stage, params: stage.parse(parameters) };
  });
  checkOrder(parsed.map(({ stage }) => stage));
  const together = FRAME_AXES.filter((axis) =>
    parsed.some(({ stage, params }) => stage.kind !== "readout" && stage.together?.(params).includes(axis)),
  );
  let layout = encodedLayout(scan, together);
  const handedOut: MapPlan[] = [];
  const stages = parsed.map(({ stage, params }): PlannedStage => {
    const input = layout;
    const arrays = readArrays(stage.files?.(params) ?? []);
    const planned = stage.plan(input, params, scan, { arrays, maps: handedOut });
    const maps = planned.maps ?? [];
    handedOut.push(...maps);
    layout = planned.layout;
    return {
      stage,
      params,
      input,
      output: layout,
      physics: planned.physics,
      bytesIn: 4 * floatCount(input),
      bytesOut: 4 * floatCount(layout),
      workBytes: planned.workBytes ?? 0,
      transformLengths: planned.transformLengths ?? [],
      reason: reasons.get(stage.id) ?? "asked for",
      maps,
      arrays,
    };
  });
  const framesPerGroup = together.reduce((product, axis) => product * scan.lengths[axis], 1);
  return {
    stages,
    drift: driftSource(stages),
    together,
    groups: frameCount(scan.lengths) / framesPerGroup,
    framesPerGroup,
    placed:
      stages.filter(({ stage }) => stage.kind === "readout").at(-1)?.output ?? encodedLayout(scan, together),
    coils: stages.findLast(({ input }) => input.axes.includes("coil"))!.input,
    result: layout,
  };
}

function driftSource(stages: readonly PlannedStage[]): Plan["drift"] {
  for (const { stage, params, arrays } of stages) {
    const source = stage.kind === "readout" ? stage.drift?.(params) : undefined;
    if (source !== undefined) return source === "navigators" ? source : arrays.get(source);
  }
  return undefined;
}

function checkOrder(stages: readonly Stage[]): void {
  const place = (stage: Stage) => STAGE_KINDS.indexOf(stage.kind);
  stages.forEach((stage, i) => {
    const before = stages[i - 1];
    if (before && place(before) > place(stage))
      throw new UsageError(
        { field: `stages: ${stage.id}` },
        `must come before ${before.id}`,
        `The order is: ${STAGES.map(({ id }) => id).join(", ")}`,
      );
  });
  for (const id of ["inverse-fft", "combine-coils"]) {
    const count = stages.filter((stage) => stage.id === id).length;
    if (count !== 1)
      throw new UsageError(
        { field: `stages: ${id}` },
        `must occur once, occurs ${count} times`,
        "An image needs it",
      );
  }
}

/** The encoded k-space of a group, every axis in k. */
function encodedLayout(scan: ScanFacts, together: readonly FrameAxis[]): Layout {
  const { matrix, fovMm } = scan.encoded;
  const axes: Axis[] = [...together, "coil", "z", "y", "x"];
  const shape = [...together.map((axis) => scan.lengths[axis]), scan.channels, matrix.z, matrix.y, matrix.x];
  return { axes, shape, kind: "complex", fovMm, inImage: [], acquired: scan.acquired };
}

/** Axes and shape of an array over all frames, those of length 1 dropped; y and x stay in 2-D data, x in 1-D. */
export function arrayShape(scan: ScanFacts, frame: Layout): { axes: Axis[]; shape: number[] } {
  const kept: [Axis, number][] = FRAME_AXES.map((axis): [Axis, number] => [axis, scan.lengths[axis]]);
  for (const axis of ["coil", "z", "y", "x"] as const)
    if (frame.axes.includes(axis)) kept.push([axis, axisLength(frame, axis)]);
  const stays = (axis: Axis) => axis === "x" || (axis === "y" && scan.dimensions > 1);
  const shown = kept.filter(([axis, length]) => length > 1 || stays(axis));
  return { axes: shown.map(([axis]) => axis), shape: shown.map(([, length]) => length) };
}

/** Counters of a frame from its index, C order over FRAME_AXES. */
export function frameCounters(scan: ScanFacts, frame: number): Record<FrameAxis, number> {
  return unravel(scan, FRAME_AXES, frame) as Record<FrameAxis, number>; // every axis was given
}

/** Which group a frame belongs to, and its place in it. */
export function groupOf(
  scan: ScanFacts,
  together: readonly FrameAxis[],
  frame: number,
): { group: number; place: number } {
  const counters = frameCounters(scan, frame);
  let group = 0;
  let place = 0;
  for (const axis of FRAME_AXES) {
    if (together.includes(axis)) place = place * scan.lengths[axis] + counters[axis];
    else group = group * scan.lengths[axis] + counters[axis];
  }
  return { group, place };
}

/** Pixel size of a layout that is all image, mm. */
export function pixelSizeMm(layout: Layout): Record<"x" | "y" | "z", number> {
  const size = {} as Record<"x" | "y" | "z", number>;
  for (const axis of SPATIAL_AXES) size[axis] = layout.fovMm[axis] / axisLength(layout, axis);
  return size;
}

/** Counters of a group's first frame. */
export function groupCounters(
  scan: ScanFacts,
  { together }: Pick<Plan, "together">,
  group: number,
): PerFrameAxis {
  const apart = FRAME_AXES.filter((axis) => !together.includes(axis));
  // The axes apart and those together are all there are.
  return { ...unravel(scan, together, 0), ...unravel(scan, apart, group) } as PerFrameAxis;
}

/** Frames of a group in the order of their places. */
export function groupFrames(
  scan: ScanFacts,
  plan: Pick<Plan, "together" | "framesPerGroup">,
  group: number,
): number[] {
  const first = groupCounters(scan, plan, group);
  return Array.from({ length: plan.framesPerGroup }, (_, place) =>
    frameIndex(scan.lengths, { ...first, ...unravel(scan, plan.together, place) }),
  );
}

/** Counters along some axes from their index, C order. */
function unravel(
  scan: ScanFacts,
  axes: readonly FrameAxis[],
  index: number,
): Partial<Record<FrameAxis, number>> {
  const counters: Partial<Record<FrameAxis, number>> = {};
  let rest = index;
  for (const axis of [...axes].reverse()) {
    counters[axis] = rest % scan.lengths[axis];
    rest = Math.floor(rest / scan.lengths[axis]);
  }
  return counters;
}
