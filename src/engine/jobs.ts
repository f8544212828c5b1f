import { ReplicaStatistics } from "../kernels/image-quality.js";
import type { Kernels } from "../kernels/kernels.js";
import { RandomStream } from "../kernels/random.js";
import { currentBuffer } from "../kernels/sample-memory.js";
import type { PerFrameAxis } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  axisLength,
  type Finding,
  type Frame,
  floatCount,
  type MapValues,
  type NoiseState,
  valueCount,
} from "../stages/stage.js";
import { Pipeline } from "./pipeline.js";
import { groupCounters, type Plan } from "./plan.js";
import { addReplicaNoise, type Replicas } from "./replica-noise.js";
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
  /** Where the result of each variant goes. */
  readonly results: readonly Span[];
  /** Where the images before the last combination of each variant go, if they are wanted. */
  readonly coils: readonly Span[] | undefined;
  /** Pseudo-replicas for a map of the noise's standard deviation. */
  readonly replicas: Replicas | undefined;
}

export type Job = BlockJob | GroupJob;

/** What a group job says of one variant beside its result. */
export interface VariantReply {
  readonly noise: NoiseState;
  readonly maps: readonly MapValues[];
  readonly findings: readonly Finding[];
  /** Of the stages that are its own. */
  readonly seconds: number;
  /** Standard deviation of the noise of each value of the result, over pseudo-replicas. */
  readonly deviation?: Float32Array;
}

export interface JobReply {
  /** Of a group job, one for each variant. */
  readonly variants?: readonly VariantReply[];
  /** The images before the last combination are in the group's own memory, not in `coils`. */
  readonly coilsInData?: boolean;
  readonly timings: Readonly<Record<string, number>>;
}

/** Does jobs with one thread's kernels on the shared memory; the same code on the main thread and in workers. */
export class JobRunner {
  readonly #plans: readonly Plan[];
  readonly #scan: ScanFacts;
  readonly #kernels: Kernels;
  readonly #memory: WebAssembly.Memory;
  readonly #pipeline: Pipeline;
  readonly #timings: Timings;

  /** @param plans variants: their readout stages are alike */
  constructor(
    plans: readonly Plan[],
    scan: ScanFacts,
    kernels: Kernels,
    memory: WebAssembly.Memory,
    timings: Timings,
  ) {
    this.#plans = plans;
    this.#scan = scan;
    this.#kernels = kernels;
    this.#memory = memory;
    this.#timings = timings;
    this.#pipeline = new Pipeline(plans, scan, kernels, timings);
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
    const { placed } = this.#plans[0]!;
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
    const sampling = { counts: job.counts };
    const counters = groupCounters(this.#scan, this.#plans[0]!, job.group);
    const deviations = job.replicas && this.#replicate(data, job, counters);
    let coilsInData = false;
    const variants: VariantReply[] = [];
    this.#pipeline.runGroup(data, sampling, counters, {
      coils: (variant, coils) => {
        // Stages that work in place leave them where the k-space was: nothing to copy, if nobody else works there.
        const isInData = coils.byteOffset === data.byteOffset && coils.length === data.length;
        if (isInData && this.#plans.length === 1) coilsInData = true;
        else if (job.coils) this.#view(job.coils[variant]!).set(coils);
      },
      outcome: (variant, { result, maps, findings }, seconds) => {
        this.#view(job.results[variant]!).set(result.data);
        const deviation = deviations?.[variant];
        variants.push({ noise: result.noise, maps, findings, seconds, ...(deviation && { deviation }) });
      },
    });
    return { variants, coilsInData };
  }

  /** Standard deviation of each variant's magnitudes when noise is added to the placed samples again and again. */
  #replicate(data: Float32Array, job: GroupJob, counters: PerFrameAxis): Float32Array[] {
    const { count, seed } = job.replicas!;
    const plan = this.#plans[0]!;
    const statistics = this.#plans.map(({ result }) => new ReplicaStatistics(valueCount(result)));
    const noisy = this.#kernels.transform.allocate(data.length, false);
    const isWhite = plan.stages.some(({ stage }) => stage.id === "prewhiten");
    for (let replica = 0; replica < count; replica++) {
      noisy.set(data);
      // A stream for each group and replica: the same whoever draws it.
      const random = RandomStream.fromSeed(seed + 7919 * replica + 104729 * job.group);
      addReplicaNoise(noisy, plan.placed, job.counts, this.#scan, isWhite, random, this.#kernels);
      this.#pipeline.runGroup(noisy, { counts: job.counts }, counters, {
        coils: () => undefined,
        outcome: (variant, { result }) => {
          if (result.layout.kind === "real") statistics[variant]!.add(result.data);
          else {
            const size = new Float32Array(result.data.length / 2);
            this.#kernels.magnitude(result.data, size);
            statistics[variant]!.add(size);
          }
        },
      });
    }
    this.#kernels.transform.release(noisy);
    return statistics.map((each) => Float32Array.from(each.standardDeviation()));
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
