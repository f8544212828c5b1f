/** A region asked for wrongly, or one that holds no pixel. */
export class RegionError extends Error {
  override readonly name = "RegionError";
  readonly rule: string;
  readonly mend: string;

  constructor(rule: string, mend: string) {
    super(`region: ${rule}. ${mend}`);
    this.rule = rule;
    this.mend = mend;
  }
}

/** A rectangle or ellipse on a slice; its axes are those of the image. */
export interface Region {
  readonly shape: "rectangle" | "ellipse";
  /**
   * px: positions are pixel indices, the first pixel's middle at 0. mm: millimetres from the pixel at floor(count/2)
   * of each axis, which is the centre of the field of view.
   */
  readonly unit: "px" | "mm";
  readonly centreX: number;
  readonly centreY: number;
  readonly width: number;
  readonly height: number;
}

/** The pixel grid that a region is laid over. */
export interface PixelGrid {
  readonly height: number;
  readonly width: number;
  /** Needed for regions in mm. */
  readonly pixelHeightMm?: number | undefined;
  readonly pixelWidthMm?: number | undefined;
}

/** Far below a pixel, far above rounding: a bound that falls on a pixel's middle does so in mm as in px. */
const TOLERANCE_PIXELS = 1e-9;

/**
 * Mask of a region, [height, width] in C order: 1 inside, 0 outside. A pixel is inside when its middle is. A rectangle
 * holds its lower bounds and not its upper ones, so that n pixels wide is n pixels wherever it lies; parts beyond the
 * image are cut off.
 * @throws RegionError a size that is not positive, mm without pixel sizes, no pixel inside
 */
export function regionMask(region: Region, grid: PixelGrid): Uint8Array {
  const x = pixelSpan(region.centreX, region.width, region.unit, grid.width, grid.pixelWidthMm);
  const y = pixelSpan(region.centreY, region.height, region.unit, grid.height, grid.pixelHeightMm);
  const mask = new Uint8Array(grid.height * grid.width);
  let inside = 0;
  for (let row = 0; row < grid.height; row++) {
    for (let column = 0; column < grid.width; column++) {
      const within =
        region.shape === "ellipse" ? inEllipse(row, column) : inSpan(row, y) && inSpan(column, x);
      if (!within) continue;
      mask[row * grid.width + column] = 1;
      inside++;
    }
  }
  if (inside === 0) {
    throw new RegionError(
      "holds no pixel",
      `The image is ${grid.width} x ${grid.height} pixels; move or enlarge it.`,
    );
  }
  return mask;

  function inEllipse(row: number, column: number): boolean {
    return ((column - x.centre) / x.half) ** 2 + ((row - y.centre) / y.half) ** 2 <= 1 + TOLERANCE_PIXELS;
  }
}

/**
 * Mask from an array of the image's size: 1 where the value is not 0.
 * @throws RegionError another size, a value that is not a number, nothing but zeros
 */
export function maskFromArray(
  values: ArrayLike<number>,
  shape: readonly number[],
  grid: PixelGrid,
): Uint8Array {
  if (shape.length !== 2 || shape[0] !== grid.height || shape[1] !== grid.width) {
    throw new RegionError(
      `the mask is [${shape.join(", ")}], the image [${grid.height}, ${grid.width}]`,
      "Give a mask [y, x] of the image's size.",
    );
  }
  const mask = Uint8Array.from(values, (value) => {
    if (Number.isNaN(value)) throw new RegionError("the mask holds NaN", "Use 0 outside and 1 inside.");
    return value === 0 ? 0 : 1;
  });
  if (!mask.includes(1)) throw new RegionError("the mask holds no pixel", "Use 0 outside and 1 inside.");
  return mask;
}

/** Pixels of a region: their count, mean, and standard deviation with divisor count - 1 (NaN for one pixel). */
export interface RegionStatistics {
  readonly count: number;
  readonly mean: number;
  readonly standardDeviation: number;
}

/** @param pixels [height, width] as the mask */
export function regionStatistics(pixels: Float32Array | Float64Array, mask: Uint8Array): RegionStatistics {
  let count = 0;
  let mean = 0;
  let squares = 0;
  for (let i = 0; i < mask.length; i++) {
    if (!mask[i]) continue;
    count++;
    const step = pixels[i]! - mean;
    mean += step / count;
    squares += step * (pixels[i]! - mean);
  }
  return { count, mean, standardDeviation: Math.sqrt(squares / (count - 1)) };
}

interface PixelSpan {
  readonly centre: number;
  readonly half: number;
}

function inSpan(index: number, { centre, half }: PixelSpan): boolean {
  const fromLower = index - (centre - half) + TOLERANCE_PIXELS;
  return fromLower >= 0 && fromLower < 2 * half;
}

function pixelSpan(
  centre: number,
  size: number,
  unit: "px" | "mm",
  count: number,
  pixelMm?: number,
): PixelSpan {
  if (!(size > 0) || !Number.isFinite(size) || !Number.isFinite(centre)) {
    throw new RegionError(`a centre of ${centre} with a size of ${size}`, "Give numbers, the sizes above 0.");
  }
  if (unit === "px") return { centre, half: size / 2 };
  if (pixelMm === undefined) throw new RegionError("mm need pixel sizes", "Give the region in px.");
  return { centre: centre / pixelMm + Math.floor(count / 2), half: size / pixelMm / 2 };
}
