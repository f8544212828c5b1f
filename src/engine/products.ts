import { UsageError } from "../errors.js";
import type { ScanFacts } from "../physics/scan.js";
import { axisLength, type Layout } from "../stages/stage.js";
import type { ValueKind } from "../writers/grey-range.js";
import type { Plan } from "./plan.js";

/** What `--save` can add to the magnitude image. */
export const SAVES = ["complex", "coils", "phase", "real", "imaginary"] as const;
export type Save = (typeof SAVES)[number];

/** One array that a reconstruction writes, and how it is shown. */
export interface Product {
  readonly id: string;
  /** File name without its ending. */
  readonly stem: string;
  readonly dtype: "<f4" | "<c8";
  /** How its picture shows it: in grey, a share from 0 to 1, signed in colour, or not at all but as outline of those. */
  readonly picture: ValueKind | "share" | "colour" | "outline" | undefined;
  /** Of the values, and what they are; of maps. */
  readonly unit?: string;
  readonly describe?: string;
  /** Whether its picture leaves out what lies outside the outline. */
  readonly insideOnly?: boolean;
  /** Where its values come from: the combined images, the channels' images, or a map that a stage hands out. */
  readonly source: "result" | "coils" | "map";
}

/** The arrays over all frames of a product: facts give the lengths, `layout` one group. */
export interface Grid extends Pick<Plan, "together" | "framesPerGroup"> {
  readonly facts: ScanFacts;
  readonly layout: Layout;
}

const PRODUCTS: Readonly<Record<"magnitude" | Save, Product>> = {
  magnitude: { id: "magnitude", stem: "image", dtype: "<f4", picture: "magnitude", source: "result" },
  complex: { id: "complex", stem: "image-complex", dtype: "<c8", picture: undefined, source: "result" },
  coils: { id: "coils", stem: "coil-images", dtype: "<c8", picture: undefined, source: "coils" },
  phase: { id: "phase", stem: "image-phase", dtype: "<f4", picture: "phase", source: "result" },
  real: { id: "real", stem: "image-real", dtype: "<f4", picture: "signed", source: "result" },
  imaginary: { id: "imaginary", stem: "image-imaginary", dtype: "<f4", picture: "signed", source: "result" },
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

/** The maps that a plan's stages hand out. */
export function mapProducts(plan: Plan): Product[] {
  return plan.stages.flatMap(({ maps }) =>
    maps.map(({ name, unit, describe, picture, insideOnly = false }): Product => {
      const shown = picture === "signed" ? "colour" : name === "field-mask" ? "outline" : picture;
      return {
        id: name,
        stem: name,
        dtype: "<f4",
        unit,
        describe,
        picture: shown,
        insideOnly,
        source: "map",
      };
    }),
  );
}

/** The grid of a product's array. Maps are common to all echoes. */
export function gridOf(facts: ScanFacts, plan: Plan, product: Product): Grid {
  const { together, framesPerGroup } = plan;
  if (product.source !== "map") return { facts, together, framesPerGroup, layout: plan[product.source] };
  const { layout } = plan.stages.flatMap(({ maps }) => maps).find(({ name }) => name === product.id)!;
  const { contrast } = facts.lengths;
  const isTogether = together.includes("contrast");
  return {
    facts: { ...facts, lengths: { ...facts.lengths, contrast: 1 } },
    together: together.filter((axis) => axis !== "contrast"),
    framesPerGroup: isTogether ? framesPerGroup / contrast : framesPerGroup,
    layout,
  };
}
