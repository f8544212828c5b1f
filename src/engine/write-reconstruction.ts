import { createHash } from "node:crypto";
import { createReadStream } from "node:fs";
import path from "node:path";
import { DEFAULT_BLOCK_ROWS } from "../ingest/raw-file.js";
import type { Kernels } from "../kernels/kernels.js";
import type { Discrepancy } from "../physics/scan.js";
import type { OutputSettings, Recipe } from "../recipe/recipe.js";
import { type Frame, valueCount } from "../stages/stage.js";
import type { NpyFile } from "../writers/npy.js";
import { OutputSet } from "../writers/output-set.js";
import { PictureCollector } from "./pictures.js";
import type { GroupResult } from "./pipeline.js";
import { arrayShape, groupFrames, type Plan } from "./plan.js";
import { productValues } from "./product-values.js";
import { type Product, productsOf, type Save } from "./products.js";
import { type ReadoutFacts, readoutFacts } from "./readout-facts.js";
import { reconstruct } from "./reconstruct.js";
import type { Scan } from "./scan.js";
import { sidecar } from "./sidecar.js";

export interface WriteOptions {
  readonly out: string;
  readonly recipe: Recipe;
  readonly outputs: OutputSettings;
  readonly kernels: Kernels;
  readonly save?: readonly Save[];
  readonly force?: boolean;
  readonly blockRows?: number;
  readonly signal?: AbortSignal;
  readonly progress?: (done: number, total: number) => void;
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
}

/**
 * Run a plan and write its arrays, pictures and sidecar into a folder: all of them, or none.
 * @throws UsageError where a file exists; OutputError where one cannot be written; InputError for a faulty file
 */
export async function writeReconstruction(
  scan: Scan,
  plan: Plan,
  options: WriteOptions,
): Promise<WrittenReconstruction> {
  const { save = [], force = false } = options;
  const products = productsOf(plan, save);
  const withPicture = options.outputs.pictures ? products.filter(({ picture }) => picture !== undefined) : [];
  const names = [
    ...products.map(({ stem }) => `${stem}.npy`),
    ...withPicture.map(({ stem }) => `${stem}.png`),
  ];
  const set = new OutputSet({ folder: options.out, names, sidecar: "image.json", force });
  try {
    const hashing = hashInput(scan.file, options.signal);
    hashing.catch(() => undefined); // awaited below; until then a fault of the reconstruction comes first
    const facts = readoutFacts(scan);
    const writers = products.map((product) => new ProductWriter(set, scan, plan, product, options, facts));
    const noise = new NoiseRange();
    await reconstruct(scan, plan, reconstructOptions(options, save), (group, result) => {
      noise.add(result.result);
      for (const writer of writers) writer.add(group, result);
    });
    const pictures = writers.flatMap((writer) => writer.drawPictures());
    const outputs = await set.seal();
    const input = await hashing;
    const arrays = writers.map((writer) => writer.record);
    const text = sidecar({
      scan,
      plan,
      recipe: options.recipe,
      inputSha256: input.sha256,
      inputBytes: input.bytes,
      inputName: path.basename(scan.file),
      noise: noise.range(),
      arrays,
      pictures,
      outputs,
    });
    set.commit(`${JSON.stringify(text, null, 1)}\n`);
    const files = [...names, "image.json"].map((name) => path.join(options.out, name));
    return { folder: options.out, files, arrays, discrepancies: scan.discrepancies, facts };
  } finally {
    set.abort();
  }
}

function reconstructOptions(options: WriteOptions, save: readonly Save[]) {
  const { kernels, blockRows = DEFAULT_BLOCK_ROWS, signal, progress } = options;
  return {
    kernels,
    blockRows,
    keepCoils: save.includes("coils"),
    ...(signal && { signal }),
    ...(progress && { progress }),
  };
}

/** Writes one product's array frame by frame, and gathers its picture. */
class ProductWriter {
  readonly record: {
    file: string;
    product: string;
    dtype: string;
    axes: readonly string[];
    shape: readonly number[];
  };
  readonly #npy: NpyFile<"<f4" | "<c8">;
  readonly #picture: PictureCollector | undefined;

  constructor(
    private readonly set: OutputSet,
    private readonly scan: Scan,
    private readonly plan: Plan,
    private readonly product: Product,
    private readonly options: WriteOptions,
    facts: ReadoutFacts,
  ) {
    const layout = product.id === "coils" ? plan.coils : plan.result;
    const { axes, shape } = arrayShape(scan.facts, layout);
    const file = `${product.stem}.npy`;
    this.record = { file, product: product.id, dtype: product.dtype, axes, shape };
    this.#npy = set.createNpy(file, product.dtype, shape);
    if (options.outputs.pictures && product.picture)
      this.#picture = new PictureCollector(scan, plan, options.outputs, product, facts);
  }

  add(group: number, result: GroupResult): void {
    const image = this.product.id === "coils" ? result.coils! : result.result;
    const values = productValues(this.product, image, this.options.kernels);
    const perFrame = valueCount(image.layout) / this.plan.framesPerGroup;
    const floats = values.length / this.plan.framesPerGroup;
    groupFrames(this.scan.facts, this.plan, group).forEach((frame, place) => {
      const part = values.subarray(place * floats, (place + 1) * floats);
      this.#npy.writeAt(frame * perFrame, part);
      this.#picture?.add(frame, part);
    });
  }

  /** Draw and write the picture; returns what the sidecar says of it. */
  drawPictures(): object[] {
    return (this.#picture?.draw() ?? []).map(({ name, png, pixels, record }) => {
      this.set.write(name, png, pixels);
      return record;
    });
  }
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

async function hashInput(file: string, signal?: AbortSignal): Promise<{ sha256: string; bytes: number }> {
  const hash = createHash("sha256");
  let bytes = 0;
  for await (const piece of createReadStream(file, { highWaterMark: 1 << 20, ...(signal && { signal }) })) {
    hash.update(piece as Buffer);
    bytes += (piece as Buffer).length;
  }
  return { sha256: hash.digest("hex"), bytes };
}
