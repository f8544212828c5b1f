import { UsageError } from "../errors.js";
import type { Layout, MapPlan, StageContext } from "./stage.js";

/** Physics of a plan that measures a field: more or less of it everywhere by this would look the same. */
export const SAME_BUT_FOR = "the same but for, Hz";
/** Finding of what puts pixels back: those of the object that lie on others in the image of some echo, left at 0. */
export const FOLDED = "folded pixels";
/** Finding of what measures a map: pixels with signal where it folds, left out of its mask. */
export const FOLDED_IN_MAP = "pixels left out, the map folds there";
/** Finding: pixels with signal that a map of water leaves out, with those that touch them. */
export const NOT_WATER = "pixels left out, not water from echo to echo";

/** The maps that a stage with a field hands out. @param isMeasured whether its standard error is known */
export function fieldMapPlans(layout: Layout, isMeasured: boolean): MapPlan[] {
  const plans: MapPlan[] = [
    {
      name: "field-hz",
      unit: "Hz",
      describe: "off-resonance in the object's coordinates",
      layout,
      picture: "signed",
    },
    {
      name: "displacement-mm",
      unit: "mm",
      describe:
        "how far the field moves a pixel, positive towards a larger index; in the forward echoes where there are both",
      layout,
      picture: "signed",
    },
    {
      name: "field-mask",
      unit: "1",
      describe: "1 where the field is known and does not fold; elsewhere it is extended or ambiguous",
      layout,
    },
  ];
  if (isMeasured)
    plans.push({
      name: "field-standard-error-hz",
      unit: "Hz",
      describe: "standard error of the field from noise alone",
      layout,
      picture: "magnitude",
      insideOnly: true,
    });
  return plans;
}

/** @throws UsageError if an earlier stage hands out a field already */
export function refuseSecondField(id: string, maps: readonly MapPlan[]): void {
  if (maps.some(({ name }) => name === "field-hz"))
    throw new UsageError(
      { field: `stages: ${id}` },
      "an earlier stage makes a field map already",
      "Keep one of field-map, separate-fat-water and a given map",
    );
}

/** The field of one group while it is being put together, image by image. */
export class FieldValues {
  readonly fieldHz: Float32Array;
  readonly mask: Float32Array;
  readonly #standardErrorHz: Float32Array | undefined;

  constructor(pixels: number, isMeasured: boolean) {
    this.fieldHz = new Float32Array(pixels);
    this.mask = new Float32Array(pixels);
    this.#standardErrorHz = isMeasured ? new Float32Array(pixels) : undefined;
  }

  /** Take some pixels over. @param at pixel of the group's map at which they start */
  set(at: number, fieldHz: Float32Array, mask: ArrayLike<number>, standardErrorHz?: Float32Array): void {
    this.fieldHz.set(fieldHz, at);
    this.mask.set(mask, at);
    if (standardErrorHz) this.#standardErrorHz?.set(standardErrorHz, at);
  }

  /** @param mmPerHz displacement, of the forward echoes where there are both */
  emit(context: StageContext, mmPerHz: number): void {
    context.emit({ name: "field-hz", data: this.fieldHz });
    context.emit({ name: "displacement-mm", data: this.fieldHz.map((hz) => hz * mmPerHz) });
    context.emit({ name: "field-mask", data: this.mask });
    if (this.#standardErrorHz) context.emit({ name: "field-standard-error-hz", data: this.#standardErrorHz });
  }
}
