/** Pixel values of a real (magnitude) image, C order. */
export type Pixels = Float32Array | Float64Array;

/** What an error is measured against: the reference's 2-norm, its range (maximum minus minimum), or its mean. */
export type ErrorNormalizer = "norm" | "range" | "mean";

/**
 * Root mean square error over a property of the reference; dimensionless. State the normaliser: the values differ.
 * "norm" is `|image - reference|_2 / |reference|_2`; "range" and "mean" divide the root mean square difference.
 * @param mask pixels that count, where not 0; all by default
 */
export function normalizedRmsError(
  image: Pixels,
  reference: Pixels,
  normalizer: ErrorNormalizer,
  mask?: Uint8Array,
): number {
  const rmsDifference = Math.sqrt(meanSquareError(image, reference, mask));
  let count = 0;
  let sum = 0;
  let squares = 0;
  let low = Number.POSITIVE_INFINITY;
  let high = Number.NEGATIVE_INFINITY;
  for (let i = 0; i < reference.length; i++) {
    if (mask && !mask[i]) continue;
    const value = reference[i]!;
    count++;
    sum += value;
    squares += value * value;
    if (value < low) low = value;
    if (value > high) high = value;
  }
  if (normalizer === "norm") return rmsDifference / Math.sqrt(squares / count);
  return rmsDifference / (normalizer === "range" ? high - low : sum / count);
}

/**
 * Peak signal-to-noise ratio, `10 log10(peak^2 / MSE)`, dB; Infinity for equal images.
 * @param peak the largest value that the scale allows, or the reference's maximum
 */
export function peakSnrDb(image: Pixels, reference: Pixels, peak: number, mask?: Uint8Array): number {
  return 10 * Math.log10((peak * peak) / meanSquareError(image, reference, mask));
}

/** Mean of (image - reference)^2. */
export function meanSquareError(image: Pixels, reference: Pixels, mask?: Uint8Array): number {
  let sum = 0;
  let count = 0;
  for (let i = 0; i < image.length; i++) {
    if (mask && !mask[i]) continue;
    sum += (image[i]! - reference[i]!) ** 2;
    count++;
  }
  return sum / count;
}

/** Pixels along one side of the window of SSIM. */
export const SSIM_TAPS = 11;
const SSIM_SIGMA_PIXELS = 1.5;

/** The 11 taps of the Gaussian that weighs an SSIM window along one axis, sum 1. */
export function ssimTaps(): Float64Array {
  const taps = Float64Array.from({ length: SSIM_TAPS }, (_, i) =>
    Math.exp(-0.5 * ((i - (SSIM_TAPS - 1) / 2) / SSIM_SIGMA_PIXELS) ** 2),
  );
  const sum = taps.reduce((total, tap) => total + tap);
  return taps.map((tap) => tap / sum);
}

/**
 * Structural similarity at each place where the 11 x 11 window fits: C order, [height - 10, width - 10], at most 1;
 * entry [0, 0] is about pixel [5, 5]. K1 = 0.01, K2 = 0.03.
 * @param image,reference [height, width]
 * @param dynamicRange    L: the range of values that the scale allows
 * @param referenceMeans  `windowMeans` of the reference, for one who compares several images with it
 * @throws RangeError an image smaller than the window
 * Source: Wang, Bovik, Sheikh and Simoncelli 2004, IEEE Trans. Image Process. 13:600, doi:10.1109/TIP.2003.819861.
 */
export function structuralSimilarityMap(
  image: Pixels,
  reference: Pixels,
  [height, width]: readonly [number, number],
  dynamicRange: number,
  referenceMeans: Float64Array = windowMeans(reference, [height, width]),
): Float64Array {
  if (height < SSIM_TAPS || width < SSIM_TAPS) {
    throw new RangeError(
      `SSIM needs at least ${SSIM_TAPS} x ${SSIM_TAPS} pixels; the image has ${height} x ${width}`,
    );
  }
  const squares = new Float64Array(height * width);
  const product = new Float64Array(height * width);
  for (let i = 0; i < product.length; i++) {
    const [a, b] = [image[i]!, reference[i]!];
    squares[i] = a * a + b * b; // only the sum of both variances is needed
    product[i] = a * b;
  }
  const meanA = windowMeans(image, [height, width]);
  const square = weightedMeans(squares, height, width);
  const cross = weightedMeans(product, height, width);
  const c1 = (0.01 * dynamicRange) ** 2;
  const c2 = (0.03 * dynamicRange) ** 2;
  return meanA.map((a, i) => {
    const b = referenceMeans[i]!;
    const luminance = (2 * a * b + c1) / (a * a + b * b + c1);
    const varianceSum = square[i]! - a * a - b * b;
    return (luminance * (2 * (cross[i]! - a * b) + c2)) / (varianceSum + c2);
  });
}

/**
 * Mean structural similarity over the valid region.
 * @param mask [height, width]: only windows about these pixels count; all by default. NaN if none fits.
 */
export function structuralSimilarity(
  image: Pixels,
  reference: Pixels,
  shape: readonly [number, number],
  dynamicRange: number,
  mask?: Uint8Array,
  referenceMeans?: Float64Array,
): number {
  const map = structuralSimilarityMap(image, reference, shape, dynamicRange, referenceMeans);
  const margin = (SSIM_TAPS - 1) / 2;
  const validWidth = shape[1] - 2 * margin;
  let sum = 0;
  let count = 0;
  for (let i = 0; i < map.length; i++) {
    const row = Math.floor(i / validWidth) + margin;
    if (mask && !mask[row * shape[1] + (i % validWidth) + margin]) continue;
    sum += map[i]!;
    count++;
  }
  return sum / count;
}

/** Mean under the window of SSIM at each place where it fits: [height - 10, width - 10]. */
export function windowMeans(image: Pixels, [height, width]: readonly [number, number]): Float64Array {
  return weightedMeans(new Float64Array(image), height, width);
}

/** Separable weighted mean wherever all taps fit: [height - 10, width - 10]. */
function weightedMeans(values: Float64Array, height: number, width: number): Float64Array {
  const validHeight = height - SSIM_TAPS + 1;
  const validWidth = width - SSIM_TAPS + 1;
  const rows = new Float64Array(height * validWidth);
  for (let y = 0, to = 0; y < height; y++)
    for (let x = 0, from = y * width; x < validWidth; x++, from++, to++) rows[to] = tapSum(values, from, 1);
  const out = new Float64Array(validHeight * validWidth);
  for (let i = 0; i < out.length; i++) out[i] = tapSum(rows, i, validWidth);
  return out;
}

const [TAP_0, TAP_1, TAP_2, TAP_3, TAP_4, TAP_5] = ssimTaps() as unknown as number[] as [
  number,
  number,
  number,
  number,
  number,
  number,
];

/** The taps, the same from both ends, on eleven values `step` apart. */
function tapSum(values: Float64Array, from: number, step: number): number {
  const to = from + 10 * step;
  return (
    TAP_0 * (values[from]! + values[to]!) +
    TAP_1 * (values[from + step]! + values[to - step]!) +
    TAP_2 * (values[from + 2 * step]! + values[to - 2 * step]!) +
    TAP_3 * (values[from + 3 * step]! + values[to - 3 * step]!) +
    TAP_4 * (values[from + 4 * step]! + values[to - 4 * step]!) +
    TAP_5 * values[from + 5 * step]!
  );
}

/**
 * SNR from two equal acquisitions: `sqrt(2) * mean / SD(first - second)`, the mean taken over both images.
 * @param mask a uniform region
 * Source: NEMA MS 1, Determination of Signal-to-Noise Ratio (difference method).
 */
export function differenceSnr(first: Pixels, second: Pixels, mask?: Uint8Array): number {
  let count = 0;
  let signal = 0;
  let meanDifference = 0;
  let squares = 0; // Welford: a small difference of large values keeps its digits
  for (let i = 0; i < first.length; i++) {
    if (mask && !mask[i]) continue;
    count++;
    signal += (first[i]! + second[i]!) / 2;
    const difference = first[i]! - second[i]!;
    const step = difference - meanDifference;
    meanDifference += step / count;
    squares += step * (difference - meanDifference);
  }
  return (Math.SQRT2 * (signal / count)) / Math.sqrt(squares / (count - 1));
}

/**
 * Standard deviation of a root-sum-of-squares background over that of the noise in each real and imaginary part:
 * `sqrt(2n - b^2)`, `b = sqrt(2) Gamma(n + 1/2) / Gamma(n)`. 0.655 for one channel, towards 0.707 for many.
 * An SNR from the background is `signal * this / SD(background)`.
 * Source: Constantinides, Atalar and McVeigh 1997, Magn. Reson. Med. 38:852.
 */
export function backgroundDeviationFactor(channels: number): number {
  let mean = Math.sqrt(Math.PI / 2);
  for (let n = 1; n < channels; n++) mean *= (n + 0.5) / n;
  return Math.sqrt(2 * channels - mean * mean);
}

/**
 * Factor on the noise standard deviation of several k-space weightings in a row, sqrt(mean of the squared product):
 * exact for white noise and a unitary transform, where nothing else in the chain mixes samples.
 * @param weightings gains over one grid, all of the same length, at every acquired sample
 */
export function chainNoiseFactor(weightings: readonly Float64Array[]): number {
  const length = weightings[0]?.length ?? 0;
  let sum = 0;
  for (let i = 0; i < length; i++) {
    let gain = 1;
    for (const weighting of weightings) gain *= weighting[i]!;
    sum += gain * gain;
  }
  return length === 0 ? 1 : Math.sqrt(sum / length);
}

/**
 * Mean and standard deviation of every value over pseudo-replicas: the same data reconstructed again and again, each time
 * with fresh noise of the measured covariance added. Complex images go in as interleaved floats (per-part deviations).
 * The result depends, in its last bits, on the order of `add`: add by replica number.
 * A deviation from R replicas has a relative standard error of 1/sqrt(2(R - 1)).
 * Source: Robson et al. 2008, Magn. Reson. Med. 60:895, doi:10.1002/mrm.21728; update: Welford 1962, Technometrics 4:419.
 */
export class ReplicaStatistics {
  #count = 0;
  readonly #mean: Float64Array;
  readonly #squares: Float64Array;

  /** @param length values in each replica */
  constructor(length: number) {
    this.#mean = new Float64Array(length);
    this.#squares = new Float64Array(length);
  }

  get count(): number {
    return this.#count;
  }

  /** @throws RangeError a replica of another length */
  add(replica: Pixels): void {
    const mean = this.#mean;
    const squares = this.#squares;
    if (replica.length !== mean.length) {
      throw new RangeError(`a replica has ${replica.length} values; the ones before had ${mean.length}`);
    }
    const count = ++this.#count;
    for (let i = 0; i < mean.length; i++) {
      const value = replica[i]!;
      const step = value - mean[i]!;
      mean[i]! += step / count;
      squares[i]! += step * (value - mean[i]!);
    }
  }

  mean(): Float64Array {
    return this.#mean.slice();
  }

  /** With divisor count - 1; NaN from fewer than two replicas. */
  standardDeviation(): Float64Array {
    const divisor = this.#count > 1 ? this.#count - 1 : Number.NaN;
    return this.#squares.map((sum) => Math.sqrt(sum / divisor));
  }
}
