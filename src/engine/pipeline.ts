import { CarillonError } from "../errors.js";
import type { Kernels } from "../kernels/kernels.js";
import { FRAME_AXES, type PerFrameAxis } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import type {
  Finding,
  Frame,
  InputArrays,
  MapValues,
  NoiseState,
  ReadoutLines,
  Sampling,
  StageContext,
} from "../stages/stage.js";
import { axisLength } from "../stages/stage.js";
import type { Plan, PlannedStage } from "./plan.js";
import type { Timings } from "./timings.js";

/** Readouts are processed before their frame is known. */
const NO_COUNTERS = Object.fromEntries(FRAME_AXES.map((axis) => [axis, 0])) as PerFrameAxis;

/** What the stages made of a group. */
export interface GroupOutcome {
  readonly result: Frame;
  readonly maps: readonly MapValues[];
  readonly findings: readonly Finding[];
}

/** Where what a group becomes goes. Its arrays may be reused after a function has returned. */
export interface GroupTaker {
  /** The images before the last combination. */
  coils(variant: number, coils: Float32Array): void;
  /** @param seconds that the variant's own stages took */
  outcome(variant: number, outcome: GroupOutcome, seconds: number): void;
}

/**
 * Runs the stages of a plan on readouts and on groups of frames; the same on the main thread and in a worker. Of several
 * plans whose readout stages are alike (variants), the stages that they begin with in common run once a group.
 */
export class Pipeline {
  readonly #plan: Plan;
  readonly #scan: ScanFacts;
  readonly #kernels: Kernels;
  readonly #timings: Timings;
  readonly #readoutStages: readonly PlannedStage[];
  readonly #common: readonly PlannedStage[];
  /** The stages of each variant after the common ones. */
  readonly #branches: readonly (readonly PlannedStage[])[];

  constructor(plans: readonly Plan[], scan: ScanFacts, kernels: Kernels, timings: Timings) {
    this.#plan = plans[0]!;
    this.#scan = scan;
    this.#kernels = kernels;
    this.#timings = timings;
    this.#readoutStages = this.#plan.stages.filter(({ stage }) => stage.kind === "readout");
    const frameStages = plans.map(({ stages }) => stages.filter(({ stage }) => stage.kind !== "readout"));
    const shared = plans.length > 1 ? commonLength(frameStages) : 0;
    this.#common = frameStages[0]!.slice(0, shared);
    this.#branches = frameStages.map((stages) => stages.slice(shared));
  }

  /** The readout stages on a block of lines. The block's memory stays the caller's; the result's becomes it. */
  runReadouts(block: ReadoutLines): ReadoutLines {
    let lines = block;
    for (const { stage, params, arrays } of this.#readoutStages) {
      if (stage.kind !== "readout") continue;
      const context = this.#context(stage.id, NO_COUNTERS, arrays, [], []);
      const next = this.#step(stage.id, () => stage.run(lines, params, context));
      if (next.data !== lines.data && lines.data !== block.data) context.release(lines.data);
      lines = next;
    }
    return lines;
  }

  /** Turn sums of lines that came more than once into means. @param data the placed layout of a group */
  average(data: Float32Array, counts: Uint16Array): void {
    if (this.#scan.overrides.duplicates !== "mean") return;
    const { placed, framesPerGroup } = this.#plan;
    const coils = axisLength(placed, "coil");
    const lines = axisLength(placed, "z") * axisLength(placed, "y");
    const row = 2 * axisLength(placed, "x");
    for (let at = 0; at < framesPerGroup * lines; at++) {
      const count = counts[at]!;
      if (count < 2) continue;
      const frame = Math.floor(at / lines);
      for (let coil = 0; coil < coils; coil++) {
        const start = ((frame * coils + coil) * lines + (at % lines)) * row;
        for (let j = start; j < start + row; j++) data[j]! /= count;
      }
    }
  }

  /**
   * The k-space stages to the combination on one group, for each variant. `data` is worked on in place and stays the
   * caller's.
   * @param data [...together, coil, z, y, x] of the placed layout
   * @param counters of the group's first frame
   */
  runGroup(data: Float32Array, sampling: Sampling, counters: PerFrameAxis, taker: GroupTaker): void {
    const start: Frame = { data, layout: this.#plan.placed, sampling, noise: this.#noiseOf(sampling) };
    const maps: MapValues[] = [];
    const findings: Finding[] = [];
    const shared = this.#runStages(this.#common, start, data, counters, maps, findings, () => undefined);
    this.#branches.forEach((branch, variant) => {
      const begin = performance.now();
      const isLast = variant === this.#branches.length - 1;
      const frame = isLast ? shared : { ...shared, data: this.#copy(shared.data) };
      const outcome = { maps: [...maps], findings: [...findings] };
      const takeCoils = (coils: Float32Array) => taker.coils(variant, coils);
      const result = this.#runStages(
        branch,
        frame,
        data,
        counters,
        outcome.maps,
        outcome.findings,
        takeCoils,
      );
      taker.outcome(variant, { result, ...outcome }, (performance.now() - begin) / 1e3);
      if (result.data.byteOffset !== data.byteOffset || result.data.buffer !== data.buffer)
        this.#kernels.transform.release(result.data);
    });
  }

  /** @param kept memory that is not given back: the caller's */
  #runStages(
    stages: readonly PlannedStage[],
    start: Frame,
    kept: Float32Array,
    counters: PerFrameAxis,
    maps: MapValues[],
    findings: Finding[],
    takeCoils: (coils: Float32Array) => void,
  ): Frame {
    let frame = start;
    for (const { stage, params, arrays } of stages) {
      if (stage.kind === "readout") continue;
      const context = this.#context(stage.id, counters, arrays, maps, findings);
      if (stage.kind === "combine") takeCoils(frame.data);
      const next = this.#step(stage.id, () => stage.run(frame, params, context));
      if (next.data !== frame.data && frame.data !== kept) context.release(frame.data);
      frame = next;
    }
    return frame;
  }

  #copy(data: Float32Array): Float32Array {
    const copy = this.#kernels.transform.allocate(data.length, false);
    copy.set(data);
    return copy;
  }

  /** Noise of a pixel against that of a sample: lines that were averaged have less of it, missing ones none. */
  #noiseOf(sampling: Sampling): NoiseState {
    const { placed } = this.#plan;
    const { first, last } = placed.acquired.x;
    const share = (last - first + 1) / axisLength(placed, "x");
    let variance = 0;
    for (const count of sampling.counts) if (count > 0) variance += share / count;
    const start: NoiseState = { whitened: false, gain: Math.sqrt(variance / sampling.counts.length) };
    return this.#readoutStages.reduce(
      (state, { stage, params }) =>
        stage.kind === "readout" && stage.noise ? stage.noise(state, params) : state,
      start,
    );
  }

  #context(
    stage: string,
    counters: PerFrameAxis,
    arrays: InputArrays,
    maps: MapValues[],
    findings: Finding[],
  ): StageContext {
    const { transform } = this.#kernels;
    return {
      scan: this.#scan,
      kernels: this.#kernels,
      counters,
      arrays,
      allocate: (floats) => transform.allocate(floats, false),
      release: (data) => transform.release(data),
      emit: (map) => maps.push(map),
      emitted: (name) => maps.findLast((map) => map.name === name)?.data,
      note: (finding) => findings.push({ stage, ...finding }),
    };
  }

  /** Time a stage; errors that nobody foresaw gain the stage in which they happened. */
  #step<T>(id: string, run: () => T): T {
    try {
      return this.#timings.measure(id, run);
    } catch (error) {
      if (error instanceof CarillonError) throw error;
      throw new Error(`stage ${id}: ${error instanceof Error ? error.message : String(error)}`, {
        cause: error,
      });
    }
  }
}

/** How many stages several lists begin with in common, parameters included; the combination is never among them. */
function commonLength(lists: readonly (readonly PlannedStage[])[]): number {
  const key = (each: PlannedStage | undefined) => each && JSON.stringify([each.stage.id, each.params]);
  let length = 0;
  while (
    lists.every(
      (list) => key(list[length]) === key(lists[0]![length]) && list[length]?.stage.kind !== "combine",
    ) &&
    lists[0]![length]
  )
    length++;
  return length;
}
