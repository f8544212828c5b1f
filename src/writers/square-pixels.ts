/** Pixel size along each axis, millimetres. */
export interface PixelMm {
  readonly x: number;
  readonly y: number;
}

/** The size of a picture in which a millimetre is as long across as down. */
export interface SquareSize {
  readonly width: number;
  readonly height: number;
  /** Exact size of a picture's pixel; the two differ by the rounding of width and height to whole pixels only. */
  readonly pixelMm: PixelMm;
}

/**
 * Choose the picture size of an image [height, width]: the finer of the two pixel sizes sets the scale, and an image
 * that is small on a screen is magnified by a whole number until its longer side is about `wantedPx`.
 */
export function squareSize(width: number, height: number, pixelMm: PixelMm, wantedPx: number): SquareSize {
  const fineMm = Math.min(pixelMm.x, pixelMm.y);
  const longestPx = Math.max(width * pixelMm.x, height * pixelMm.y) / fineMm;
  const nearEnough = 0.9; // 240 of 256 wanted pixels need no doubling
  const magnification = Math.max(1, Math.ceil((nearEnough * wantedPx) / longestPx));
  const squareMm = fineMm / magnification;
  const widthPx = Math.round((width * pixelMm.x) / squareMm);
  const heightPx = Math.round((height * pixelMm.y) / squareMm);
  const exact = { x: (width * pixelMm.x) / widthPx, y: (height * pixelMm.y) / heightPx };
  return { width: widthPx, height: heightPx, pixelMm: exact };
}

/**
 * Bring an image [height, width] to the pixels of a larger picture, which covers the same field edge to edge. Along
 * an axis whose factor is whole, pixels are repeated; otherwise they are interpolated linearly between their centres
 * if `isSmooth`, or the nearest is taken (phases and masks, whose values must not be mixed).
 */
export function resample(
  image: ArrayLike<number>,
  width: number,
  height: number,
  size: SquareSize,
  isSmooth: boolean,
): Float32Array {
  if (size.width === width && size.height === height) return Float32Array.from(image);
  const across = steps(width, size.width, isSmooth);
  const down = steps(height, size.height, isSmooth);
  const out = new Float32Array(size.width * size.height);
  let at = 0;
  for (const { lower: y0, upper: y1, share: yShare } of down) {
    for (const { lower: x0, upper: x1, share: xShare } of across) {
      const above = between(image[y0 * width + x0], image[y0 * width + x1], xShare);
      const below = between(image[y1 * width + x0], image[y1 * width + x1], xShare);
      out[at++] = between(above, below, yShare);
    }
  }
  return out;
}

/** For each picture pixel along an axis: the two source pixels around its centre and the share of the upper one. */
function steps(count: number, pictureCount: number, isSmooth: boolean) {
  const isRepeat = !isSmooth || pictureCount % count === 0;
  return Array.from({ length: pictureCount }, (_, i) => {
    const centre = ((i + 0.5) * count) / pictureCount; // source pixel j spans j to j + 1
    const inside = Math.max(0, Math.min(count - 1, isRepeat ? Math.floor(centre) : centre - 0.5));
    const lower = Math.floor(inside);
    return { lower, upper: Math.min(lower + 1, count - 1), share: inside - lower };
  });
}

/** Linear between two values; with share 0 the upper one does not matter, even if it is NaN. */
function between(lower = Number.NaN, upper = Number.NaN, share: number): number {
  return share === 0 ? lower : lower + (upper - lower) * share;
}
