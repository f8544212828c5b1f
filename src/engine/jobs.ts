import type { Kernels } from "../kernels/kernels.js";
import { currentBuffer } from "../kernels/sample-memory.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  axisLength,
  type Finding,
  type Frame,
  floatCount,
  type MapValues,
  type NoiseState,
} from "../stages/stage.js";
import { Pipeline } from "./pipeline.js";
import { groupCounters, type Plan } from "./plan.js";
import type { Timings } from "./timings.js";

/** Floats in the shared sample memory, by address: what threads tell each other instead of arrays. */
export interface Span {
  readonly byte: number;
  readonly floats: number;
}

/** Run the readout stages on a block of decoded readouts. */
export interface BlockJob {
  readonly kind: "block";
  /** [line, coil, encoded sample]. */
  readonly samples: Span;
  readonly lines: number;
  /** As in ReadoutLines. */
  readonly backward: Uint8Array;
  readonly echoes: Uint16Array;
  readonly driftHz: Float64Array | undefined;
  /**
   * Byte address of each line's row of coil 0 in its group: rows are written there. Undefined where a line comes
   * again: the rows then go back to the start of `samples`, for the main thread to add in the order of the file.
   */
  readonly targets: Float64Array | undefined;
}

/** Run the other stages on a complete group. */
export interface GroupJob {
  readonly kind: "group";
  readonly group: number;
  readonly data: Span;
  readonly counts: Uint16Array;
  readonly result: Span;
  /** Where the images before the last combination go, if they are wanted. */
  readonly coils: Span | undefined;
}

export type Job = BlockJob | GroupJob;

export interface JobReply {
  /** Of a group job. */
  readonly noise?: NoiseState;
  readonly maps?: readonly MapValues[];
  readonly findings?: readonly Finding[];
  /** The images before the last combination are in the group's own memory, not in `coils`. */
  readonly coilsInData?: boolean;
  readonly timings: Readonly<Record<string, number>>;
}

/** Does jobs with one thread's kernels on the shared memory; the same code on the main thread and in workers. */
export class JobRunner {
  readonly #plan: Plan;
  readonly #scan: ScanFacts;
  readonly #kernels: Kernels;
  readonly #memory: WebAssembly.Memory;
  readonly #pipeline: Pipeline;
  readonly #timings: Timings;

  constructor(plan: Plan, scan: ScanFacts, kernels: Kernels, memory: WebAssembly.Memory, timings: Timings) {
    this.#plan = plan;
    this.#scan = scan;
    this.#kernels = kernels;
    this.#memory = memory;
    this.#timings = timings;
    this.#pipeline = new Pipeline(plan, scan, kernels, timings);
  }

  run(job: Job): JobReply {
    const reply = job.kind === "block" ? this.#runBlock(job) : this.#runGroup(job);
    return { ...reply, timings: this.#timings.take() };
  }

  #view({ byte, floats }: Span): Float32Array {
    return new Float32Array(currentBuffer(this.#memory), byte, floats);
  }

  #runBlock({ samples, lines, backward, echoes, driftHz, targets }: BlockJob): Omit<JobReply, "timings"> {
    const data = this.#view(samples);
    const { channels, encoded } = this.#scan;
    const done = this.#pipeline.runReadouts({
      data,
      lines,
      samples: encoded.matrix.x,
      coils: channels,
      backward,
      echoes,
      driftHz,
    });
    const { placed } = this.#plan;
    const row = 2 * done.samples;
    // Rows are copied within the whole memory: a view for each would be thousands of objects a block.
    const whole = new Float32Array(currentBuffer(this.#memory));
    const from = done.data.buffer === whole.buffer ? done.data.byteOffset / 4 : undefined;
    const put = (to: number, start: number, floats: number) => {
      if (from === undefined) whole.set(done.data.subarray(start, start + floats), to);
      else whole.copyWithin(to, from + start, from + start + floats);
    };
    if (!targets) put(samples.byte / 4, 0, lines * channels * row);
    else {
      const coilStep = axisLength(placed, "z") * axisLength(placed, "y") * row;
      for (let line = 0; line < lines; line++)
        for (let coil = 0; coil < channels; coil++)
          put(targets[line]! / 4 + coil * coilStep, (line * channels + coil) * row, row);
    }
    if (done.data !== data) this.#kernels.transform.release(done.data);
    return {};
  }

  #runGroup(job: GroupJob): Omit<JobReply, "timings"> {
    const data = this.#view(job.data);
    this.#pipeline.average(data, job.counts);
    let coilsInData = false;
    const takeCoils = (coils: Float32Array) => {
      // Stages that work in place leave them where the k-space was: nothing to copy.
      if (coils.byteOffset === data.byteOffset && coils.length === data.length) coilsInData = true;
      else if (job.coils) this.#view(job.coils).set(coils);
    };
    const counters = groupCounters(this.#scan, this.#plan, job.group);
    const outcome = this.#pipeline.runGroup(data, { counts: job.counts }, counters, takeCoils);
    const { result, maps, findings } = outcome;
    this.#view(job.result).set(result.data);
    if (result.data.byteOffset !== data.byteOffset) this.#kernels.transform.release(result.data);
    return { noise: result.noise, maps, findings, coilsInData };
  }
}

/** A group's result as the main thread sees it: layouts from the plan, values in the shared memory. */
export function frameAt(
  plan: Plan,
  memory: WebAssembly.Memory,
  span: Span,
  which: "result" | "coils",
  noise: NoiseState,
): Frame {
  const layout = plan[which];
  const data = new Float32Array(currentBuffer(memory), span.byte, floatCount(layout));
  return { data, layout, sampling: undefined, noise };
}
