import path from "node:path";
import { InputError } from "../errors.js";
import type { Kernels } from "../kernels/kernels.js";
import type { Discrepancy, ScanFacts } from "../physics/scan.js";
import type { OutputSettings } from "../recipe/recipe.js";
import type { Frame } from "../stages/stage.js";
import type { FileHashes } from "../writers/output-file.js";
import { OutputSet } from "../writers/output-set.js";
import { Hasher } from "./hasher.js";
import { type Placement, PlacementTally, placementOf } from "./placement.js";
import { ProductWriter } from "./product-writer.js";
import { mapProducts, productsOf, type Save } from "./products.js";
import { type ReadoutFacts, readoutFacts } from "./readout-facts.js";
import type { GroupResult } from "./reconstruct.js";
import { type Attempt, type PlannedRecipe, type RunOptions, run } from "./run.js";
import type { Scan } from "./scan.js";
import { sidecar } from "./sidecar.js";
import type { Timings } from "./timings.js";

export interface WriteOptions extends RunOptions {
  readonly out: string;
  readonly save?: readonly Save[];
  readonly force?: boolean;
  /** Fail where header and readouts disagree or lines are missing. */
  readonly strict?: boolean;
  /** Write the maps that stages hand out, and not the images. */
  readonly mapsOnly?: boolean;
}

/** A recipe worked out for a scan, and how its outputs look. */
export interface Prepared extends PlannedRecipe {
  readonly outputs: OutputSettings;
}

/** What a reconstruction wrote and found. */
export interface WrittenReconstruction {
  readonly folder: string;
  /** Paths, the image first, the sidecar last. */
  readonly files: readonly string[];
  readonly arrays: readonly {
    readonly file: string;
    readonly axes: readonly string[];
    readonly shape: readonly number[];
  }[];
  readonly discrepancies: readonly Discrepancy[];
  readonly facts: ReadoutFacts;
  readonly placement: Placement;
  readonly transform: Kernels["id"];
  /** Seconds by part of the work, over all threads. */
  readonly timings: Readonly<Record<string, number>>;
}

/**
 * Reconstruct a file and write its arrays, pictures and sidecar into a folder: all of them, or none.
 * @param prepare the recipe for what the scan is, worked out
 * @throws UsageError where a file exists; OutputError where one cannot be written; InputError for a faulty file, or
 * under `strict` for one with discrepancies
 */
export async function writeReconstruction(
  file: string,
  prepare: (facts: ScanFacts) => Prepared,
  options: WriteOptions,
): Promise<WrittenReconstruction> {
  const hasher = new Hasher(file);
  // At once: while the HDF5 library loads, the other core is free.
  const input = hasher.hash(file);
  input.catch(() => undefined); // awaited below; until then a fault of the reconstruction comes first
  let attempt: Writing | undefined;
  try {
    const runOptions = { ...options, keepCoils: options.save?.includes("coils") ?? false };
    const done = await run(file, runOptions, prepare, (facts, planned, kernels) => {
      // `planned` is what `prepare` made.
      attempt = new Writing(file, facts, planned as Prepared, options, kernels, hasher);
      return attempt;
    });
    const { scan, timings } = done;
    if (options.strict) failOnProblem(scan);
    const files = await done.attempt.finish(scan, input, timings, options.signal);
    return {
      folder: options.out,
      files,
      arrays: done.attempt.records,
      discrepancies: scan.discrepancies,
      facts: readoutFacts(scan),
      placement: done.attempt.placement(scan),
      transform: done.kernels,
      timings: timings.take(),
    };
  } finally {
    attempt?.abort();
    hasher.dismiss();
  }
}

function failOnProblem(scan: Scan): void {
  const problem = scan.discrepancies.find(({ severity }) => severity === "problem");
  if (problem)
    throw new InputError(
      { file: scan.file },
      problem.message,
      "Leave out --strict to reconstruct all the same",
    );
}

/** The outputs of one attempt. */
class Writing implements Attempt {
  readonly #set: OutputSet;
  readonly #names: readonly string[];
  readonly #writers: readonly ProductWriter[];
  readonly #prepared: Prepared;
  readonly #out: string;
  readonly #noise = new NoiseRange();
  readonly #placement = new PlacementTally();
  readonly #sidecar: string;
  readonly #transform: Kernels["id"];

  constructor(
    file: string,
    facts: ScanFacts,
    prepared: Prepared,
    options: WriteOptions,
    kernels: Kernels,
    hasher: Hasher,
  ) {
    const { plan, outputs } = prepared;
    const images = options.mapsOnly ? [] : productsOf(plan, options.save ?? []);
    const products = [...images, ...mapProducts(plan)];
    const pictured = outputs.pictures
      ? products.filter(({ picture }) => picture !== undefined && picture !== "outline")
      : [];
    this.#sidecar = options.mapsOnly ? "field-map.json" : "image.json";
    this.#names = [
      ...products.map(({ stem }) => `${stem}.npy`),
      ...pictured.map(({ stem }) => `${stem}.png`),
    ];
    this.#set = new OutputSet({
      folder: options.out,
      names: this.#names,
      sidecar: this.#sidecar,
      force: options.force ?? false,
      hasher: (path, payloadStart) => hasher.hash(path, payloadStart),
    });
    this.#writers = products.map(
      (product) => new ProductWriter(this.#set, file, facts, plan, outputs, product, kernels),
    );
    this.#prepared = prepared;
    this.#transform = kernels.id;
    this.#out = options.out;
  }

  get records() {
    return this.#writers.map(({ record }) => record);
  }

  placement(scan: Scan): Placement {
    return placementOf(scan.facts, this.#prepared.plan, this.#placement);
  }

  async use(group: number, [result]: readonly GroupResult[]): Promise<void> {
    if (!result) return;
    this.#noise.add(result.result);
    this.#placement.add(group, result);
    await Promise.all(this.#writers.map((writer) => writer.add(group, result)));
  }

  abort(): void {
    this.#set.abort();
  }

  /** Draw the pictures, hash, write the sidecar and rename everything. Returns the paths. */
  async finish(
    scan: Scan,
    hashing: Promise<FileHashes>,
    timings: Timings,
    signal: AbortSignal | undefined,
  ): Promise<string[]> {
    // Arrays are hashed while the pictures are drawn.
    for (const { record } of this.#writers) this.#set.sealOne(record.file).catch(() => undefined); // awaited by seal
    const outline = this.#writers.find(({ product }) => product.picture === "outline")?.shown;
    const pictures = timings.measure("pictures", () =>
      this.#writers.flatMap((writer) => writer.drawPicture(scan, outline)),
    );
    const start = performance.now();
    const [outputs, input] = await unlessAborted(Promise.all([this.#set.seal(), hashing]), signal);
    timings.add("wait for hashes", (performance.now() - start) / 1e3);
    const { plan, recipe } = this.#prepared;
    const text = sidecar({
      scan,
      plan,
      recipe,
      inputSha256: input.sha256,
      inputBytes: input.bytes,
      inputName: path.basename(scan.file),
      transform: this.#transform,
      noise: this.#noise.range(),
      placement: this.placement(scan),
      arrays: this.records,
      pictures,
      outputs,
    });
    this.#set.commit(`${JSON.stringify(text, null, 1)}\n`);
    return [...this.#names, this.#sidecar].map((name) => path.join(this.#out, name));
  }
}

/** What `work` resolves to, or the signal's reason as soon as it is aborted: hashes of large files take seconds. */
async function unlessAborted<T>(work: Promise<T>, signal: AbortSignal | undefined): Promise<T> {
  if (!signal) return work;
  const aborted = new Promise<never>((_, reject) => {
    signal.addEventListener("abort", () => reject(signal.reason), { once: true });
  });
  const done = await Promise.race([work, aborted]);
  signal.throwIfAborted();
  return done;
}

/** The smallest and largest noise gain over all groups. */
class NoiseRange {
  #whitened = false;
  #smallest = Number.POSITIVE_INFINITY;
  #largest = 0;

  add({ noise }: Frame): void {
    this.#whitened = noise.whitened;
    this.#smallest = Math.min(this.#smallest, noise.gain);
    this.#largest = Math.max(this.#largest, noise.gain);
  }

  range() {
    return { whitened: this.#whitened, smallest: this.#smallest, largest: this.#largest };
  }
}
