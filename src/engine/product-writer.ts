import type { Kernels } from "../kernels/kernels.js";
import type { ScanFacts } from "../physics/scan.js";
import type { OutputSettings } from "../recipe/recipe.js";
import { type Frame, valueCount } from "../stages/stage.js";
import type { NpyFile } from "../writers/npy.js";
import type { OutputSet } from "../writers/output-set.js";
import { PictureCollector } from "./pictures.js";
import { arrayShape, groupFrames, type Plan } from "./plan.js";
import type { Product } from "./products.js";
import type { GroupResult } from "./reconstruct.js";
import type { Scan } from "./scan.js";

/** Writes one product's array frame by frame, in any order, and gathers its picture. */
export class ProductWriter {
  /** What the sidecar says of the array. */
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
    file: string,
    private readonly facts: ScanFacts,
    private readonly plan: Plan,
    outputs: OutputSettings,
    private readonly product: Product,
    private readonly kernels: Kernels,
  ) {
    const { axes, shape } = arrayShape(facts, product.id === "coils" ? plan.coils : plan.result);
    const name = `${product.stem}.npy`;
    this.record = { file: name, product: product.id, dtype: product.dtype, axes, shape };
    this.#npy = set.createNpy(name, product.dtype, shape);
    if (outputs.pictures && product.picture)
      this.#picture = new PictureCollector(file, facts, plan, outputs, product);
  }

  /** Write a group's images; they must not change before the promise settles. */
  async add(group: number, result: GroupResult): Promise<void> {
    const image = this.product.id === "coils" ? result.coils! : result.result;
    const values = productValues(this.product, image, this.kernels);
    const perFrame = valueCount(image.layout) / this.plan.framesPerGroup;
    const floats = values.length / this.plan.framesPerGroup;
    const writes = groupFrames(this.facts, this.plan, group).map((frame, place) => {
      const part = values.subarray(place * floats, (place + 1) * floats);
      this.#picture?.add(frame, part);
      return this.#npy.writeAt(frame * perFrame, part);
    });
    await Promise.all(writes);
  }

  /** Draw and write the picture; returns what the sidecar says of it, or nothing where there is none. */
  drawPicture(scan: Scan): object[] {
    if (!this.#picture) return [];
    const { name, png, pixels, record } = this.#picture.draw(scan);
    this.set.write(name, png, pixels);
    return [record];
  }
}

/** The values of a product, made from a complex or real image; a view of the image where it is that already. */
function productValues(product: Product, image: Frame, kernels: Kernels): Float32Array {
  const { data, layout } = image;
  if (product.dtype === "<c8" || layout.kind === "real") return data; // only the magnitude asks it of a real image
  const values = new Float32Array(data.length / 2);
  if (product.id === "magnitude") kernels.magnitude(data, values);
  else if (product.id === "phase")
    for (let i = 0; i < values.length; i++) values[i] = Math.atan2(data[2 * i + 1]!, data[2 * i]!);
  else
    for (let i = 0, part = product.id === "imaginary" ? 1 : 0; i < values.length; i++)
      values[i] = data[2 * i + part]!;
  return values;
}
