import { CarillonError } from "../errors.js";
import type { Kernels } from "../kernels/kernels.js";
import type { ScanFacts } from "../physics/scan.js";
import type { Frame, NoiseState, ReadoutLines, Sampling, SideOutput, StageContext } from "../stages/stage.js";
import { axisLength } from "../stages/stage.js";
import type { Plan, PlannedStage } from "./plan.js";

/** What became of a group of frames: the result, the channel images where they are wanted, and what stages emitted. */
export interface GroupResult {
  readonly result: Frame;
  readonly coils: Frame | undefined;
  readonly sideOutputs: readonly SideOutput[];
}

/** Runs a plan's stages on readouts and on groups of frames; the same on the main thread and in a worker. */
export class Pipeline {
  readonly #plan: Plan;
  readonly #scan: ScanFacts;
  readonly #kernels: Kernels;
  /** The layout that readouts fill; frames start from it. */
  readonly #readoutStages: readonly PlannedStage[];
  readonly #frameStages: readonly PlannedStage[];

  constructor(plan: Plan, scan: ScanFacts, kernels: Kernels) {
    this.#plan = plan;
    this.#scan = scan;
    this.#kernels = kernels;
    this.#readoutStages = plan.stages.filter(({ stage }) => stage.kind === "readout");
    this.#frameStages = plan.stages.filter(({ stage }) => stage.kind !== "readout");
  }

  /** The readout stages on a block of lines. The block's memory is the caller's; what comes back is, too. */
  runReadouts(block: ReadoutLines): ReadoutLines {
    const context = this.#context([]);
    let lines = block;
    for (const { stage, params } of this.#readoutStages) {
      if (stage.kind !== "readout") continue;
      const next = named(stage.id, () => stage.run(lines, params, context));
      if (next.data !== lines.data && lines.data !== block.data) context.release(lines.data);
      lines = next;
    }
    return lines;
  }

  /**
   * The k-space stages to the combination on one group. Takes over `data` and gives its memory back.
   * @param data [...together, coil, z, y, x] of the placed layout
   * @param keepCoils whether the images before the last combination are wanted
   */
  runGroup(data: Float32Array, sampling: Sampling, keepCoils: boolean): GroupResult {
    const sideOutputs: SideOutput[] = [];
    const context = this.#context(sideOutputs);
    let frame: Frame = { data, layout: this.#plan.placed, sampling, noise: this.#noiseOf(sampling) };
    let coils: Frame | undefined;
    for (const { stage, params } of this.#frameStages) {
      if (stage.kind === "readout") continue;
      if (keepCoils && stage.kind === "combine") coils = { ...frame, data: frame.data.slice() };
      const next = named(stage.id, () => stage.run(frame, params, context));
      if (next.data !== frame.data) context.release(frame.data);
      frame = next;
    }
    return { result: frame, coils, sideOutputs };
  }

  release(frame: Frame): void {
    this.#kernels.transform.release(frame.data);
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

  #context(sideOutputs: SideOutput[]): StageContext {
    const { transform } = this.#kernels;
    return {
      scan: this.#scan,
      kernels: this.#kernels,
      allocate: (floats) => transform.allocate(floats),
      release: (data) => transform.release(data),
      emit: (output) => sideOutputs.push(output),
    };
  }
}

/** Errors that nobody foresaw gain the stage in which they happened. */
function named<T>(id: string, run: () => T): T {
  try {
    return run();
  } catch (error) {
    if (error instanceof CarillonError) throw error;
    throw new Error(`stage ${id}: ${error instanceof Error ? error.message : String(error)}`, {
      cause: error,
    });
  }
}
