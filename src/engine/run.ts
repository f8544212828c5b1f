import { statSync } from "node:fs";
import { availableParallelism, totalmem } from "node:os";
import type { Worker } from "node:worker_threads";
import { CarillonError, InputError } from "../errors.js";
import { DEFAULT_BLOCK_ROWS, RawFile } from "../ingest/raw-file.js";
import { ScanIndex } from "../ingest/scan-index.js";
import { createKernels } from "../kernels/create-kernels.js";
import type { Kernels } from "../kernels/kernels.js";
import { SampleMemory } from "../kernels/sample-memory.js";
import { simdSupported } from "../kernels/simd-module.js";
import { createSimdPlace } from "../kernels/simd-place.js";
import { frameIndex, SPATIAL_AXES } from "../physics/layout.js";
import type { ScanFacts, ScanOverrides } from "../physics/scan.js";
import type { Recipe } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { Crew, startWorkers, type WorkerSetup } from "./crew.js";
import { driftOf } from "./drift.js";
import { JobRunner } from "./jobs.js";
import { groupOf, type Plan } from "./plan.js";
import { Contradiction, confirmPreview, previewReadouts, previewScan } from "./preview.js";
import { type GroupResult, type Pass, runPasses } from "./reconstruct.js";
import type { Replicas } from "./replica-noise.js";
import { completeOverrides, indexRaw, type ReadOptions, type Scan, scanOf } from "./scan.js";
import { Timings } from "./timings.js";

/** How a reconstruction is carried out; none of it changes a result. */
export interface RunOptions extends ReadOptions {
  /** Threads that compute. Default: the cores of the machine. */
  readonly workers?: number;
  /** Most memory for samples. Default: a quarter of the machine's. */
  readonly memoryBytes?: number;
  /** Default: SIMD where the machine has it, else plain. The two agree to rounding, not to the bit. */
  readonly transform?: "simd" | "plain";
  /** Whether the images before the last combination are wanted, of all groups or of some. */
  readonly keepCoils?: boolean | ((facts: ScanFacts, plan: Plan, group: number) => boolean);
  /** Pseudo-replicas, of the groups that `groups` names. */
  readonly replicas?: Replicas & { groups(facts: ScanFacts, plan: Plan): ReadonlySet<number> };
}

export interface PlannedRecipe {
  readonly plan: Plan;
  readonly recipe: Recipe;
  /** Others whose readout stages, and frames that belong together, are the same: they share the pass over the file. */
  readonly variants?: readonly PlannedRecipe[];
}

/** Takes the results of one attempt, those of the plan first. An attempt that the file contradicts is aborted, and another begun. */
export interface Attempt {
  /** The result's arrays may be reused once the promise has settled. */
  use(group: number, results: readonly GroupResult[]): Promise<void>;
  abort(): void;
}

export interface RunResult<A extends Attempt> extends PlannedRecipe {
  readonly attempt: A;
  readonly scan: Scan;
  readonly kernels: Kernels["id"];
  readonly timings: Timings;
}

/** Below this many bytes a file is done before a worker has started. */
const WORTH_WORKERS_BYTES = 24e6;

/**
 * Reconstruct a file: in one pass where its header tells what its readouts will be, else after indexing it.
 * @param prepare the recipe for what the scan is, worked out
 * @param begin where results go; called again if the first attempt is contradicted
 * @throws InputError, UsageError; the signal's reason when aborted
 */
export async function run<A extends Attempt>(
  file: string,
  options: RunOptions,
  prepare: (facts: ScanFacts) => PlannedRecipe,
  begin: (facts: ScanFacts, planned: PlannedRecipe, kernels: Kernels) => A,
): Promise<RunResult<A>> {
  const overrides = completeOverrides(options);
  const hands = new Hands(file, options);
  const raw = await RawFile.open(file, overrides.group).catch((error) => {
    hands.dismiss();
    throw error;
  });
  try {
    const foreseen = previewScan(raw, overrides, options.blockRows ?? DEFAULT_BLOCK_ROWS);
    if (foreseen && !needsIndex(foreseen, prepare)) {
      const result = await attemptRun(raw, { foreseen, overrides }, options, hands, prepare, begin);
      if (result) return result;
    }
    const scan = await indexRaw(raw, overrides, options);
    return (await attemptRun(raw, { scan, overrides }, options, hands, prepare, begin))!;
  } finally {
    raw.close();
    hands.dismiss();
  }
}

/**
 * Stages that compare echoes or slices need what only the index of all readouts knows, directions and places; and a
 * drift is known only once all navigators are.
 */
function needsIndex(foreseen: ScanFacts, prepare: (facts: ScanFacts) => PlannedRecipe): boolean {
  try {
    const { stages, drift } = prepare(foreseen).plan;
    return drift !== undefined || stages.some(({ stage }) => stage.kind === "series");
  } catch (error) {
    // What a header lets expect of several echoes may be wrong; if the index bears the error out, it comes again.
    if (error instanceof CarillonError && foreseen.lengths.contrast > 1) return true;
    throw error;
  }
}

interface Knowledge {
  readonly overrides: ScanOverrides;
  /** What the header lets expect, to be confirmed by the pass itself; or what an earlier pass found. */
  readonly foreseen?: ScanFacts;
  readonly scan?: Scan;
}

/** One attempt; undefined where the file contradicts what was foreseen. */
async function attemptRun<A extends Attempt>(
  raw: RawFile,
  { foreseen, scan, overrides }: Knowledge,
  options: RunOptions,
  hands: Hands,
  prepare: (facts: ScanFacts) => PlannedRecipe,
  begin: (facts: ScanFacts, planned: PlannedRecipe, kernels: Kernels) => A,
): Promise<RunResult<A> | undefined> {
  const facts = scan?.facts ?? foreseen!;
  const blockRows = options.blockRows ?? blockRowsFor(facts);
  const planned = prepare(facts);
  const { plan, recipe } = planned;
  const all = [planned, ...(planned.variants ?? [])];
  const { memory, kernels, crew, timings } = await hands.setUp(all, facts, blockRows);
  const { keepCoils = false, replicas } = options;
  const attempt = begin(facts, planned, kernels);
  const index = scan ? undefined : new ScanIndex(raw.file, raw.header, overrides);
  const pass: Pass = {
    raw,
    scan: facts,
    plan,
    crew,
    memory,
    kernels,
    timings,
    index,
    blockRows,
    driftHz: scan && driftOf(raw, scan, plan, blockRows),
    plans: all.map((each) => each.plan),
    keepCoils: typeof keepCoils === "boolean" ? () => keepCoils : (group) => keepCoils(facts, plan, group),
    replicas: replicas && { ...replicas, groups: replicas.groups(facts, plan) },
    sampleBytes: options.memoryBytes ?? totalmem() / 4,
    expected: scan ? countedReadouts(scan, plan) : () => previewReadouts(facts, raw, plan.framesPerGroup),
    signal: options.signal,
    progress: options.progress ?? (() => undefined),
  };
  try {
    await runPasses(pass, (group, results) => attempt.use(group, results));
    const found = scan ?? scanOf(raw, index!, overrides);
    if (foreseen) confirmPreview(foreseen, found.facts);
    return { attempt, scan: found, plan, recipe, kernels: kernels.id, timings };
  } catch (error) {
    attempt.abort();
    // A counter beyond what was foreseen is an InputError only if the whole index says so too.
    if (foreseen && (error instanceof Contradiction || error instanceof InputError)) return undefined;
    throw error;
  }
}

/** Readouts of each group, from the index. */
function countedReadouts({ facts, index }: Scan, plan: Plan): (group: number) => number {
  const counted = new Map<number, number>();
  for (const { counters, readouts } of index.frames.values()) {
    const { group } = groupOf(facts, plan.together, frameIndex(facts.lengths, counters));
    counted.set(group, (counted.get(group) ?? 0) + readouts);
  }
  return (group) => counted.get(group) ?? 0;
}

/** The threads of a run. Workers start with it, so that they load while the HDF5 library does. */
class Hands {
  readonly #useSimd: boolean;
  #workers: Worker[];

  constructor(file: string, options: RunOptions) {
    this.#useSimd = options.transform !== "plain" && simdSupported();
    const count = (options.workers ?? availableParallelism()) - 1; // the main thread is one of them
    const bytes = statSync(file, { throwIfNoEntry: false })?.size ?? 0;
    this.#workers = this.#useSimd && bytes >= WORTH_WORKERS_BYTES ? startWorkers(count) : [];
  }

  /** Memory, kernels and crew for one attempt. */
  async setUp(planned: readonly PlannedRecipe[], facts: ScanFacts, blockRows: number) {
    const plans = planned.map(({ plan }) => plan);
    const memory = new SampleMemory();
    const kernels = await createKernels(memory, this.#useSimd ? "simd" : "plain");
    const timings = new Timings();
    const own = new JobRunner(plans, facts, kernels, memory.memory, new Timings());
    const lengths = new Set(plans.flatMap((plan) => [...transformLengths(plan)]));
    const work = { lengths, channels: facts.channels };
    const bytes = Math.max(...plans.map((plan) => workspaceBytes(plan, blockRows)));
    const setups = this.#workers.map((): WorkerSetup => {
      const place = createSimdPlace(memory, work, bytes);
      return { place, facts, recipes: planned.map(({ recipe }) => recipe) };
    });
    return { memory, kernels, timings, crew: new Crew(own, this.#workers, setups) };
  }

  dismiss(): void {
    for (const worker of this.#workers) void worker.terminate();
    this.#workers = [];
  }
}

/** Every length that a stage of the plan may transform. */
function transformLengths(plan: Plan): Set<number> {
  const lengths = new Set<number>();
  for (const { input, output, transformLengths } of plan.stages) {
    for (const length of transformLengths) lengths.add(length);
    for (const axis of SPATIAL_AXES) {
      lengths.add(axisLength(input, axis));
      lengths.add(axisLength(output, axis));
      // fit-matrix transforms what its crop leaves
      lengths.add(Math.round((axisLength(input, axis) * output.fovMm[axis]) / input.fovMm[axis]));
    }
  }
  return lengths;
}

/** Bytes of samples that are read at a time: few enough to stay in a core's cache from one stage to the next. */
const BLOCK_BYTES = 2 ** 20;

function blockRowsFor({ channels, encoded }: ScanFacts): number {
  return Math.max(1, Math.min(256, Math.round(BLOCK_BYTES / (8 * channels * encoded.matrix.x))));
}

/** Memory that one thread's stages take at most. */
function workspaceBytes(plan: Plan, blockRows: number): number {
  const lines = axisLength(plan.placed, "coil") * axisLength(plan.placed, "x") * blockRows * 8;
  const groups = plan.stages
    .filter(({ stage }) => stage.kind !== "readout")
    .map(({ bytesIn, bytesOut, workBytes }) => bytesIn + bytesOut + workBytes);
  return Math.max(lines, ...groups);
}
