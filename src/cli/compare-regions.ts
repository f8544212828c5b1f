import type { VariantImages } from "../engine/compare.js";
import { readArrays } from "../engine/input-arrays.js";
import { pixelSizeMm } from "../engine/plan.js";
import { UsageError } from "../errors.js";
import { maskFromArray, type Region, RegionError, regionMask } from "../kernels/region.js";

const FORM =
  "For example: ellipse:0,-20,30,30 (mm from the centre), rectangle:40,50,16,16px (pixels), or mask.npy";

/**
 * A region of the flags, read at once and laid on the reference's image once that is there.
 * @throws UsageError for a wrong form or a file that cannot be read; later, for no pixel inside
 */
export function regionFrom(flag: string, text: string): (reference: VariantImages) => Uint8Array {
  const mask = text.endsWith(".npy") ? readArrays([text]).get(text)! : undefined;
  const region = mask ? undefined : parseRegion(flag, text);
  return ({ height, width, plan }) => {
    const pixel = pixelSizeMm(plan.result);
    const grid = { height, width, pixelHeightMm: pixel.y, pixelWidthMm: pixel.x };
    try {
      return region ? regionMask(region, grid) : maskFromArray(mask!.data, mask!.shape, grid);
    } catch (error) {
      if (!(error instanceof RegionError)) throw error;
      throw new UsageError({ field: flag, value: text }, error.rule, error.mend);
    }
  };
}

export function parseRegion(flag: string, text: string): Region {
  const match = /^(rectangle|ellipse):([^,]+),([^,]+),([^,]+),([^,]+?)(px|mm)?$/.exec(text);
  const numbers = match?.slice(2, 6).map(Number) ?? [];
  if (!match || !numbers.every(Number.isFinite))
    throw new UsageError({ field: flag, value: text }, "must be SHAPE:X,Y,WIDTH,HEIGHT or a mask", FORM);
  const [centreX, centreY, width, height] = numbers as [number, number, number, number];
  return {
    shape: match[1] as Region["shape"],
    unit: match[6] === "px" ? "px" : "mm",
    centreX,
    centreY,
    width,
    height,
  };
}

/** @throws UsageError */
export function parseEdge(text: string): { axis: "x" | "y"; line: number; positionPixels: number } {
  const match = /^(x|y):(\d+):(\d+)$/.exec(text);
  if (!match)
    throw new UsageError({ field: "--edge", value: text }, "must be AXIS:LINE:PX", "For example: x:128:60");
  return { axis: match[1] as "x" | "y", line: Number(match[2]), positionPixels: Number(match[3]) };
}

/** Pixels above half of the bright level (the 99th percentile). */
export function defaultRegion(image: Float32Array): Uint8Array {
  const bright = image.slice().sort()[Math.floor(0.99 * (image.length - 1))]!;
  const mask = Uint8Array.from(image, (value) => (value > bright / 2 ? 1 : 0));
  return mask.includes(1) ? mask : mask.fill(1);
}
