import type { Kernels } from "../kernels/kernels.js";
import { frameIndex } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import type { OutputSettings } from "../recipe/recipe.js";
import { type Frame, valueCount } from "../stages/stage.js";
import type { NpyFile } from "../writers/npy.js";
import type { OutputSet } from "../writers/output-set.js";
import { PictureCollector } from "./pictures.js";
import { arrayShape, groupCounters, groupFrames, groupOf, type Plan } from "./plan.js";
import { type Grid, gridOf, type Product } from "./products.js";
import type { GroupResult } from "./reconstruct.js";
import type { Scan } from "./scan.js";

/** Writes one product's array frame by frame, in any order, and gathers its picture. */
export class ProductWriter {
  /** What the sidecar says of the array. */
  readonly record: {
    file: string;
    product: string;
    dtype: string;
    unit?: string;
    describe?: string;
    axes: readonly string[];
    shape: readonly number[];
  };
  readonly #npy: NpyFile<"<f4" | "<c8">;
  readonly #grid: Grid;
  readonly #picture: PictureCollector | undefined;

  constructor(
    private readonly set: OutputSet,
    file: string,
    private readonly facts: ScanFacts,
    private readonly plan: Plan,
    outputs: OutputSettings,
    readonly product: Product,
    private readonly kernels: Kernels,
  ) {
    this.#grid = gridOf(facts, plan, product);
    const { axes, shape } = arrayShape(this.#grid.facts, this.#grid.layout);
    const name = `${product.stem}.npy`;
    const { id, dtype, unit, describe } = product;
    const meaning = unit === undefined || describe === undefined ? {} : { unit, describe };
    this.record = { file: name, product: id, dtype, ...meaning, axes, shape };
    this.#npy = set.createNpy(name, product.dtype, shape);
    if (outputs.pictures && product.picture)
      this.#picture = new PictureCollector(file, this.#grid, outputs, product);
  }

  /** Write a group's values; they must not change before the promise settles. */
  async add(group: number, result: GroupResult): Promise<void> {
    const values = this.#valuesOf(result);
    if (!values) return;
    const { facts, layout, framesPerGroup } = this.#grid;
    const perFrame = valueCount(layout) / framesPerGroup;
    const floats = values.length / framesPerGroup;
    const writes = groupFrames(facts, this.#grid, this.#gridGroup(group)).map((frame, place) => {
      const part = values.subarray(place * floats, (place + 1) * floats);
      this.#picture?.add(frame, part);
      return this.#npy.writeAt(frame * perFrame, part);
    });
    await Promise.all(writes);
  }

  #valuesOf(result: GroupResult): Float32Array | undefined {
    const { source, id } = this.product;
    if (source === "map") return result.maps.find(({ name }) => name === id)?.data;
    return productValues(this.product, result[source]!, this.kernels);
  }

  /** The group of the product's own grid: echoes may be groups of their own, which a map does not tell apart. */
  #gridGroup(group: number): number {
    const { facts, together } = this.#grid;
    const counters = {
      ...groupCounters(this.facts, this.plan, group),
      ...(this.product.source === "map" && { contrast: 0 }),
    };
    return groupOf(facts, together, frameIndex(facts.lengths, counters)).group;
  }

  /** Values of the images that a picture shows, to outline others. */
  get shown(): Float32Array | undefined {
    return this.#picture?.values;
  }

  /**
   * Draw and write the picture; returns what the sidecar says of it, or nothing where there is none.
   * @param outline of pictures in colour: of the same images, 0 outside the object
   */
  drawPicture(scan: Scan, outline: Float32Array | undefined): object[] {
    if (!this.#picture || this.product.picture === "outline") return [];
    const { name, png, pixels, record } = this.#picture.draw(scan, outline);
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
