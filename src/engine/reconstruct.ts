import { decodeReadout } from "../ingest/decode.js";
import { roleOf } from "../ingest/flags.js";
import { checkPayload, placeLine, runsBackward } from "../ingest/place.js";
import type { RawFile, ReadoutBlock } from "../ingest/raw-file.js";
import type { ScanIndex } from "../ingest/scan-index.js";
import type { Kernels } from "../kernels/kernels.js";
import { currentBuffer, type SampleMemory } from "../kernels/sample-memory.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  axisLength,
  type Finding,
  type Frame,
  floatCount,
  type Layout,
  type MapValues,
} from "../stages/stage.js";
import type { Crew } from "./crew.js";
import { type Destination, GroupStore, type OpenGroup } from "./group-store.js";
import { frameAt, type JobReply } from "./jobs.js";
import type { Plan } from "./plan.js";
import type { Replicas } from "./replica-noise.js";
import type { Timings } from "./timings.js";

/** What became of a group of frames under one variant. Its arrays are valid only while it is used. */
export interface GroupResult {
  readonly result: Frame;
  readonly coils: Frame | undefined;
  readonly maps: readonly MapValues[];
  readonly findings: readonly Finding[];
  /** Of the stages that are the variant's own, over one thread. */
  readonly seconds: number;
  /** Noise of each value over pseudo-replicas, where they were asked for. */
  readonly deviation: Float32Array | undefined;
}

/** Takes the results of a group, those of each variant together: one where there is one plan. */
export type UseGroup = (group: number, results: readonly GroupResult[]) => Promise<void>;

/** All that one pass over a file needs. */
export interface Pass {
  readonly raw: RawFile;
  readonly scan: ScanFacts;
  readonly plan: Plan;
  /** The plan and its variants. */
  readonly plans: readonly Plan[];
  /** Pseudo-replicas of these groups. */
  readonly replicas: (Replicas & { readonly groups: ReadonlySet<number> }) | undefined;
  readonly crew: Crew;
  readonly memory: SampleMemory;
  readonly kernels: Kernels;
  /** Most memory for groups of samples. */
  readonly sampleBytes: number;
  readonly timings: Timings;
  readonly blockRows: number;
  readonly keepCoils: (group: number) => boolean;
  /** Readouts of a group. */
  readonly expected: (group: number) => number;
  /** Drift of the resonance at each image readout, in the order of the file, Hz; where the plan asks for it. */
  readonly driftHz: Float64Array | undefined;
  /** Hears every readout of the pass, in the order of the file. */
  readonly index: ScanIndex | undefined;
  readonly signal: AbortSignal | undefined;
  readonly progress: (done: number, total: number) => void;
}

/** The sample memory ends below 4 GiB; blocks on their way and results need some of it beside the groups. */
const MOST_SAMPLE_BYTES = 3.5 * 2 ** 30;

/** Blocks whose readouts are being processed at a time: what bounds the memory of samples on their way. */
const BLOCKS_AHEAD = 12;

/**
 * Read a file block by block, have its readouts processed and placed, and hand each group to `use` once it is finished.
 * Groups for which memory was lacking are done in further passes.
 * @throws InputError for a faulty file; Contradiction where readouts are not as `expected`; the signal's reason
 */
export async function runPasses(pass: Pass, use: UseGroup): Promise<void> {
  const finished = new Set<number>();
  const useAndNote: UseGroup = async (group, results) => {
    await use(group, results);
    finished.add(group);
  };
  let { index } = pass;
  for (let deferred = 1; deferred > 0; ) {
    deferred = await new PassRun({ ...pass, index }, new Set(finished), useAndNote).run();
    index = undefined; // the first pass has heard them all
  }
}

class PassRun {
  readonly #pass: Pass;
  readonly #store: GroupStore;
  readonly #use: UseGroup;
  /** Blocks are finished in the order of the file, whoever processed them. */
  #tail: Promise<void> = Promise.resolve();
  /** The ends of the blocks on their way, the oldest first. */
  readonly #blocks: Promise<void>[] = [];
  readonly #groups = new Set<Promise<void>>();
  #failure: unknown;
  /** Image readouts so far. */
  #imageReadouts = 0;

  constructor(pass: Pass, finished: ReadonlySet<number>, use: UseGroup) {
    this.#pass = pass;
    this.#use = use;
    const { plan, scan, memory, sampleBytes, expected } = pass;
    // What plans, workers and their kernels have taken by now is not for samples.
    const budgetBytes = Math.min(memory.usedBytes + sampleBytes, MOST_SAMPLE_BYTES);
    this.#store = new GroupStore(plan, scan, memory, budgetBytes, expected, finished);
  }

  /** Returns the number of groups that must wait for another pass. */
  async run(): Promise<number> {
    const { raw, blockRows, signal, progress, timings } = this.#pass;
    try {
      for (let first = 0; first < raw.readouts; first += blockRows) {
        const count = Math.min(blockRows, raw.readouts - first);
        const start = performance.now();
        raw.readBlock(first, count, (block) => {
          timings.add("read", (performance.now() - start) / 1e3);
          this.#take(block);
        });
        progress(first + count, raw.readouts);
        // Between blocks the event loop breathes: workers, signals and progress are heard while the library is synchronous.
        await new Promise((resolve) => setImmediate(resolve));
        signal?.throwIfAborted();
        if (this.#blocks.length > BLOCKS_AHEAD) await this.#blocks.shift();
        if (this.#store.isTight) await this.#drain();
        if (this.#failure) throw this.#failure;
      }
      for (const open of this.#store.closeRest()) this.#finishIfPlaced(open);
      await this.#drain();
      if (this.#failure) throw this.#failure;
      return this.#store.deferred.size;
    } catch (error) {
      await this.#drain().catch(() => undefined);
      throw error;
    }
  }

  /** Wait for all that is under way. */
  async #drain(): Promise<void> {
    await this.#tail;
    while (this.#groups.size) await Promise.all(this.#groups);
  }

  /** Index a block, decode its image readouts into sample memory, and have the readout stages run on them. */
  #take(block: ReadoutBlock): void {
    const { timings, index, scan, memory, kernels, raw, driftHz } = this.#pass;
    const { lines, touched } = this.#destinations(block);
    const perLine = 2 * scan.channels * scan.encoded.matrix.x;
    const samples = lines.length ? memory.allocate(lines.length * perLine, false) : undefined;
    const decoded = new Map<number, Float32Array>();
    timings.measure("decode", () => {
      for (const [i, { row }] of lines.entries()) {
        const isStored = decodeReadout(
          block.samples(row),
          block.heads[row]!,
          scan,
          samples!,
          i * perLine,
          raw.file,
        );
        if (isStored) decoded.set(row, samples!.subarray(i * perLine, (i + 1) * perLine));
      }
    });
    // Samples that were decoded as they are stored lie where the kernels are fast.
    const energyOf = (row: number) => {
      const copy = decoded.get(row);
      const energy = copy && new Float64Array(scan.encoded.matrix.x);
      if (energy) kernels.addEnergy(copy, energy);
      return energy;
    };
    if (index) timings.measure("index", () => index.add(block, energyOf));
    const destinations = lines.map(({ to }) => to);
    const again = destinations.some((to) => to.again);
    const job = samples && {
      kind: "block" as const,
      samples: { byte: samples.byteOffset, floats: samples.length },
      lines: lines.length,
      echoes: Uint16Array.from(lines, ({ row }) => block.heads[row]!.counters.contrast),
      driftHz: driftHz && Float64Array.from(lines, ({ ordinal }) => driftHz[ordinal]!),
      backward: Uint8Array.from(lines, ({ row }) =>
        runsBackward(block.heads[row]!, scan.overrides.readoutPolarity) ? 1 : 0,
      ),
      targets: again ? undefined : Float64Array.from(destinations, (to) => to.byte),
    };
    const reply = job ? this.#pass.crew.submit(job) : Promise.resolve(undefined);
    reply.catch(() => undefined); // heard in the tail
    this.#tail = this.#tail
      .then(() => reply)
      .then((done) => {
        if (done) timings.addAll(done.timings);
        if (samples && again) this.#placeAgain(samples, destinations);
        if (samples) memory.release(samples);
        for (const { open } of destinations) open.placed++;
        for (const open of touched) this.#finishIfPlaced(open);
      })
      .catch((error) => {
        this.#failure ??= error;
      });
    this.#blocks.push(this.#tail);
  }

  /** Where the image readouts of a block go; all-zero ones count as not acquired. */
  #destinations(block: ReadoutBlock) {
    const { scan, raw } = this.#pass;
    const lines: { row: number; to: Destination; ordinal: number }[] = [];
    const touched = new Set<OpenGroup>();
    block.heads.forEach((head, row) => {
      checkPayload(head, block.payloadFloats(row), raw.file);
      if (head.encodingSpace !== scan.encoding || roleOf(head, scan.calibrationMode) !== "image") return;
      const ordinal = this.#imageReadouts++;
      const isZero = block.samples(row).every((value) => value === 0);
      const to = this.#store.arrive(placeLine(head, scan, raw.file), isZero);
      if (!to) return;
      touched.add("open" in to ? to.open : to);
      if ("open" in to) lines.push({ row, to, ordinal });
    });
    return { lines, touched };
  }

  /** Lines of which some came before: added, or put in their place, in the order of the file. */
  #placeAgain(samples: Float32Array, destinations: readonly Destination[]): void {
    const { plan, scan, memory } = this.#pass;
    const row = 2 * axisLength(plan.placed, "x");
    const coilStep = axisLength(plan.placed, "z") * axisLength(plan.placed, "y") * row;
    const whole = new Float32Array(currentBuffer(memory.memory));
    destinations.forEach(({ byte, again }, line) => {
      for (let coil = 0; coil < scan.channels; coil++) {
        const from = (line * scan.channels + coil) * row;
        const to = byte / 4 + coil * coilStep;
        if (again && scan.overrides.duplicates === "mean")
          for (let j = 0; j < row; j++) whole[to + j]! += samples[from + j]!;
        else whole.set(samples.subarray(from, from + row), to);
      }
    });
  }

  #finishIfPlaced(open: OpenGroup): void {
    if (!open.complete || open.finishing || open.placed < open.arrived) return;
    open.finishing = true;
    const work = this.#runGroup(open)
      .catch((error) => {
        this.#failure ??= error;
      })
      .finally(() => this.#groups.delete(work));
    this.#groups.add(work);
  }

  async #runGroup(open: OpenGroup): Promise<void> {
    const { plans, memory, keepCoils, replicas, crew, timings } = this.#pass;
    const allocate = (layout: Layout) => memory.allocate(floatCount(layout), false);
    const results = plans.map(({ result }) => allocate(result));
    const coils = keepCoils(open.group) ? plans.map((plan) => allocate(plan.coils)) : undefined;
    const span = (array: Float32Array) => ({ byte: array.byteOffset, floats: array.length });
    const reply: JobReply = await crew.submit({
      kind: "group",
      group: open.group,
      data: span(open.data),
      counts: open.counts,
      results: results.map(span),
      coils: coils?.map(span),
      replicas: replicas?.groups.has(open.group) ? { count: replicas.count, seed: replicas.seed } : undefined,
    });
    timings.addAll(reply.timings);
    const start = performance.now();
    const used = plans.map((plan, v): GroupResult => {
      const { noise, maps, findings, seconds, deviation } = reply.variants![v]!;
      const coilsAt = coils && span(reply.coilsInData ? open.data : coils[v]!);
      return {
        result: frameAt(plan, memory.memory, span(results[v]!), "result", noise),
        coils: coilsAt && frameAt(plan, memory.memory, coilsAt, "coils", noise),
        maps,
        findings,
        seconds,
        deviation,
      };
    });
    await this.#use(open.group, used);
    timings.add("write", (performance.now() - start) / 1e3);
    for (const array of [...results, ...(coils ?? [])]) memory.release(array);
    this.#store.release(open);
  }
}
