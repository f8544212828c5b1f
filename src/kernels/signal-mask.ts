import type { VolumeSize } from "./unwrap.js";

/** Pixels that the bright level is taken from, evenly spread: enough for its percent. */
const SAMPLED = 8192;

/**
 * Pixels that hold signal: root of the sum of squares over the echoes above a share of its bright level (the 99th
 * percentile, which a few outliers do not move) and above `noiseMultiple` times the noise.
 * @param echoes interleaved complex64, the same pixels each
 * @param share  of the bright level
 * @param noiseDeviation of the real (and of the imaginary) part of one echo
 * @returns 1 for signal
 */
export function signalMask(
  echoes: readonly Float32Array[],
  share: number,
  noiseDeviation = 0,
  noiseMultiple = 5,
): Uint8Array {
  const energy = new Float32Array(echoes[0]!.length / 2);
  for (const echo of echoes) {
    for (let i = 0; i < energy.length; i++)
      energy[i]! += echo[2 * i]! * echo[2 * i]! + echo[2 * i + 1]! * echo[2 * i + 1]!;
  }
  const every = Math.ceil(energy.length / SAMPLED);
  const sample = Float32Array.from(
    { length: Math.floor(energy.length / every) },
    (_, i) => energy[i * every]!,
  );
  const bright = quantile(sample, 0.99);
  const floor = Math.max(bright * share * share, echoes.length * (noiseMultiple * noiseDeviation) ** 2);
  const mask = new Uint8Array(energy.length);
  for (let i = 0; i < mask.length; i++) mask[i] = energy[i]! > floor ? 1 : 0;
  return mask;
}

/**
 * A mask without specks: pixels of which fewer than four of the eight neighbours in the slice are set, as noise leaves them.
 * @param mask [slices, rows, columns]
 */
export function withoutSpecks(mask: Uint8Array, size: VolumeSize): Uint8Array {
  const neighbours = setNeighbours(mask, size);
  return mask.map((flag, i) => (flag && neighbours[i]! >= 4 ? 1 : 0));
}

/** A mask and the pixels that touch it in the slice, corners too. @param mask [slices, rows, columns] */
export function grown(mask: Uint8Array, size: VolumeSize): Uint8Array {
  const neighbours = setNeighbours(mask, size);
  return mask.map((flag, i) => (flag || neighbours[i]! > 0 ? 1 : 0));
}

/** How many of a pixel's eight neighbours in the slice are set. */
function setNeighbours(mask: Uint8Array, { slices, rows, columns }: VolumeSize): Uint8Array {
  const out = new Uint8Array(mask.length);
  for (let row = 0, i = 0; row < slices * rows; row++) {
    const y = row % rows;
    for (let x = 0; x < columns; x++, i++) {
      if (!mask[i]) continue;
      for (let dy = y > 0 ? -1 : 0; dy <= (y + 1 < rows ? 1 : 0); dy++)
        for (let dx = x > 0 ? -1 : 0; dx <= (x + 1 < columns ? 1 : 0); dx++)
          if (dx !== 0 || dy !== 0) out[i + dy * columns + dx]!++;
    }
  }
  return out;
}

const TILES = 8;

/**
 * Standard deviation of white noise in the real (and imaginary) part of an image, from the image itself: the median of
 * the squared diagonal second differences, to which smooth signal adds little (for complex normal noise the median of
 * |d|^2 is 2 ln 2 times the variance of a part), over the quietest tiles of the image, since edges ring.
 * Within 10 % where a tenth of the image is empty; too low where zero-filling has made neighbours alike. A measured
 * noise level is better.
 * Source: after Donoho and Johnstone 1994, Biometrika 81:425, doi:10.1093/biomet/81.3.425 (median of the finest differences).
 * @param image interleaved complex64, [rows, columns], both at least 2
 */
export function imageNoiseDeviation(image: Float32Array, rows: number, columns: number): number {
  const medians: number[] = [];
  const tiles = Math.max(1, Math.min(TILES, Math.floor(rows / 8), Math.floor(columns / 8)));
  for (let r = 0; r < tiles; r++) {
    for (let c = 0; c < tiles; c++) {
      const [top, bottom] = [r, r + 1].map((edge) => Math.floor((edge * (rows - 1)) / tiles)) as [
        number,
        number,
      ];
      const [left, right] = [c, c + 1].map((edge) => Math.floor((edge * (columns - 1)) / tiles)) as [
        number,
        number,
      ];
      medians.push(quantile(squaredDifferences(image, columns, top, bottom, left, right), 0.5));
    }
  }
  return Math.sqrt(quantile(Float32Array.from(medians), 0.05) / (2 * Math.LN2));
}

/** `|a - b - c + d|^2 / 4` of the 2 x 2 pixels at each place of a tile: its mean is that of |noise|^2. */
function squaredDifferences(
  image: Float32Array,
  columns: number,
  top: number,
  bottom: number,
  left: number,
  right: number,
): Float32Array {
  const out = new Float32Array((bottom - top) * (right - left));
  const line = 2 * columns;
  for (let y = top, to = 0; y < bottom; y++) {
    for (let x = left, i = y * line + 2 * left; x < right; x++, i += 2, to++) {
      const re = image[i]! - image[i + 2]! - image[i + line]! + image[i + line + 2]!;
      const im = image[i + 1]! - image[i + 3]! - image[i + line + 1]! + image[i + line + 3]!;
      out[to] = (re * re + im * im) / 4;
    }
  }
  return out;
}

/** The value below which a share of the values lies; no interpolation. */
function quantile(values: Float32Array, share: number): number {
  const sorted = values.slice().sort();
  return sorted[Math.min(sorted.length - 1, Math.floor(share * sorted.length))] ?? 0;
}
