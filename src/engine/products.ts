import { UsageError } from "../errors.js";
import { axisLength } from "../stages/stage.js";
import type { ValueKind } from "../writers/grey-range.js";
import type { Plan } from "./plan.js";

/** What `--save` can add to the magnitude image. */
export const SAVES = ["complex", "coils", "phase", "real", "imaginary"] as const;
export type Save = (typeof SAVES)[number];

/** One array that a reconstruction writes, and how it is shown. */
export interface Product {
  readonly id: "magnitude" | Save;
  /** File name without its ending. */
  readonly stem: string;
  readonly dtype: "<f4" | "<c8";
  /** How its picture shows it; undefined where it has none. */
  readonly picture: ValueKind | undefined;
}

const PRODUCTS: Readonly<Record<Product["id"], Product>> = {
  magnitude: { id: "magnitude", stem: "image", dtype: "<f4", picture: "magnitude" },
  complex: { id: "complex", stem: "image-complex", dtype: "<c8", picture: undefined },
  coils: { id: "coils", stem: "coil-images", dtype: "<c8", picture: undefined },
  phase: { id: "phase", stem: "image-phase", dtype: "<f4", picture: "phase" },
  real: { id: "real", stem: "image-real", dtype: "<f4", picture: "signed" },
  imaginary: { id: "imaginary", stem: "image-imaginary", dtype: "<f4", picture: "signed" },
};

/**
 * The arrays that a plan gives with these saves, the magnitude image first.
 * @throws UsageError where a complex image is asked of a combination that has none
 */
export function productsOf(plan: Plan, saves: readonly Save[]): Product[] {
  const wantsPhase = saves.find((save) => save !== "coils");
  if (wantsPhase && plan.result.kind === "real") {
    const channels = axisLength(plan.coils, "coil");
    throw new UsageError(
      { field: "--save", value: wantsPhase },
      `a root-sum-of-squares image of ${channels} channels is a magnitude without phase`,
      "Use --save coils: the complex images of the single channels have it",
    );
  }
  return [PRODUCTS.magnitude, ...SAVES.filter((save) => saves.includes(save)).map((save) => PRODUCTS[save])];
}
