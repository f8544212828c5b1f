import { existsSync } from "node:fs";
import { fileURLToPath } from "node:url";
import { Worker } from "node:worker_threads";
import type { SimdPlace } from "../kernels/simd-transform.js";
import type { ScanFacts } from "../physics/scan.js";
import type { Recipe } from "../recipe/recipe.js";
import type { Job, JobReply, JobRunner } from "./jobs.js";

/** What a worker needs to make its own runner. */
export interface WorkerSetup {
  readonly place: SimdPlace;
  readonly facts: ScanFacts;
  /** Of the plan and its variants. */
  readonly recipes: readonly Recipe[];
}

export type ToWorker = { readonly setup: WorkerSetup } | { readonly id: number; readonly job: Job };
/** A worker's first word, once it has loaded and made its runner. */
export const READY = "ready";
export type JobAnswer = { readonly id: number } & (
  | { readonly reply: JobReply }
  | { readonly error: unknown }
);

export type FromWorker = typeof READY | JobAnswer;

/** A thread's short-lived objects are few: what V8 would set aside for them costs more memory than the samples. */
export const YOUNG_HEAP = { maxYoungGenerationSizeMb: 4 };

/** Jobs that wait at a worker beside the one it does: enough that it never idles while the main thread reads. */
const AHEAD = 8;
/** Groups at a worker: with more, the main thread would wait for them at the end with nothing to do. */
const MOST_GROUPS = 2;

interface Hand {
  readonly worker: Worker;
  /** Loaded and set up: until then others do what would have to wait for it. */
  isReady: boolean;
  busy: number;
  /** Groups among its jobs: each is as long as many blocks. */
  groups: number;
}

/**
 * The threads that do jobs: workers, and the main thread itself, which helps where all of them are busy.
 * Who does a job changes nothing about its result.
 */
export class Crew {
  readonly #hands: Hand[];
  readonly #own: JobRunner;
  readonly #waiting = new Map<
    number,
    { resolve(reply: JobReply): void; reject(error: unknown): void; hand: Hand; job: Job }
  >();
  #next = 0;
  #failure: unknown;

  /** @param workers started before, with `startWorkers`; each gets its setup now */
  constructor(own: JobRunner, workers: readonly Worker[], setups: readonly WorkerSetup[]) {
    this.#own = own;
    this.#hands = workers.map((worker) => ({ worker, isReady: false, busy: 0, groups: 0 }));
    this.#hands.forEach((hand, i) => {
      const { worker } = hand;
      worker.on("message", (message: FromWorker) => {
        if (message === READY) hand.isReady = true;
        else this.#hear(message);
      });
      worker.on("error", (error) => this.#fail(error));
      worker.postMessage({ setup: setups[i]! } satisfies ToWorker);
    });
  }

  /** Have a job done: by the least busy worker, or here and now where none has room. */
  submit(job: Job): Promise<JobReply> {
    if (this.#failure) return Promise.reject(this.#failure);
    const hand = this.#hands.reduce<Hand | undefined>(
      (best, each) => (hasRoom(each, job) && (!best || each.busy < best.busy) ? each : best),
      undefined,
    );
    if (!hand) return new Promise((resolve) => resolve(this.#own.run(job)));
    hand.busy++;
    if (job.kind === "group") hand.groups++;
    const id = this.#next++;
    return new Promise((resolve, reject) => {
      this.#waiting.set(id, { resolve, reject, hand, job });
      hand.worker.postMessage({ id, job } satisfies ToWorker);
    });
  }

  #hear(message: JobAnswer): void {
    const entry = this.#waiting.get(message.id);
    if (!entry) return;
    this.#waiting.delete(message.id);
    entry.hand.busy--;
    if (entry.job.kind === "group") entry.hand.groups--;
    if ("reply" in message) entry.resolve(message.reply);
    else entry.reject(message.error);
  }

  /** A worker died: nothing that it was to do will ever come. */
  #fail(error: unknown): void {
    this.#failure = error;
    for (const { reject } of this.#waiting.values()) reject(error);
    this.#waiting.clear();
  }
}

function hasRoom({ isReady, busy, groups }: Hand, job: Job): boolean {
  return isReady && busy < AHEAD && (job.kind !== "group" || groups < MOST_GROUPS);
}

/**
 * Start worker threads early: they load while the HDF5 library does. They wait for their setup, and do not keep the
 * process alive. None where the bundled worker is missing (the sources are run without a build).
 */
export function startWorkers(count: number): Worker[] {
  const file = workerFile();
  if (file === undefined) return [];
  return Array.from({ length: count }, () => {
    const worker = new Worker(file, { resourceLimits: YOUNG_HEAP });
    worker.unref();
    return worker;
  });
}

/** The bundled worker, beside the bundle that this code is in, or in dist where the sources are run. */
export function workerFile(name = "worker.js"): string | undefined {
  const here = fileURLToPath(import.meta.url);
  const folder = here.endsWith(".ts") ? "../../dist/" : here.includes("/chunks/") ? "../" : "./";
  const file = fileURLToPath(new URL(folder + name, import.meta.url));
  return existsSync(file) ? file : undefined;
}
