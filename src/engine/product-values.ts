import type { Kernels } from "../kernels/kernels.js";
import type { Frame } from "../stages/stage.js";
import type { Product } from "./products.js";

/** The values of a product, made from a complex or real image; a view of the image where it is that already. */
export function productValues(product: Product, image: Frame, kernels: Kernels): Float32Array {
  const { data, layout } = image;
  if (product.dtype === "<c8") return data;
  if (layout.kind === "real") return data; // the planner lets only the magnitude ask for this
  const values = new Float32Array(data.length / 2);
  if (product.id === "magnitude") kernels.magnitude(data, values);
  else if (product.id === "phase")
    for (let i = 0; i < values.length; i++) values[i] = Math.atan2(data[2 * i + 1]!, data[2 * i]!);
  else
    for (let i = 0, part = product.id === "imaginary" ? 1 : 0; i < values.length; i++)
      values[i] = data[2 * i + part]!;
  return values;
}
