import { closestEchoes } from "./echo-times.js";
import { grown, withoutSpecks } from "./signal-mask.js";
import { smoothSlices } from "./smooth-field.js";
import { unwrapPhase, type VolumeSize, wrapped } from "./unwrap.js";

export interface PhaseLineOptions {
  /** Echo times, seconds, all different. */
  readonly echoSeconds: readonly number[];
  /** Standard deviation of the noise in the real (and in the imaginary) part. */
  readonly noiseDeviation: number;
  /** 1 where there is signal, [slices, rows, columns]. */
  readonly mask: Uint8Array;
  /** False while the echoes do not lie on each other: then nothing follows a line, and all pixels are taken. */
  readonly areAligned: boolean;
}

/** What a fit of water and fat together says; without it a pixel of fat alone passes for water in another field. */
export interface FatView {
  /** The field, Hz, [slices, rows, columns]; a rough one will do. */
  readonly fieldHz: Float32Array;
  /** What fat adds to the field that water would show, Hz, by its phase between the two closest echoes. */
  readonly asFieldHz: number;
}

export interface PhaseLine {
  /** Hz; not smoothed; meaningful where the weight is not 0. */
  readonly fieldHz: Float32Array;
  /** 1 / Hz^2, inverse variances; 0 outside the mask. */
  readonly weights: Float32Array;
  /** The given mask less the pixels that are not of water alone, as far as the echoes show it. */
  readonly mask: Uint8Array;
  readonly wrapLimitHz: number;
}

/**
 * Slope of the echoes' phases: unwrapped between the two closest echoes, then a weighted line through all of them.
 * Pixels whose echoes follow no line, and those of fat, are told from the others and left out.
 */
export function phaseLine(
  echoes: readonly Float32Array[],
  grid: VolumeSize,
  options: PhaseLineOptions,
  fat?: FatView,
): PhaseLine {
  const { echoSeconds, noiseDeviation, areAligned } = options;
  const { first, second, gapSeconds } = closestEchoes(echoSeconds);
  const difference = phaseDifference(echoes[first]!, echoes[second]!);
  const toHz = -1 / (2 * Math.PI * gapSeconds);
  const wrapLimitHz = 1 / (2 * gapSeconds);
  const fit = new LineFit(echoes, echoSeconds, noiseDeviation);
  const all = fitLines(fit, difference, options.mask, grid, toHz);
  const others = options.mask.map((flag, i) =>
    flag && ((areAligned && all.astray[i]) || isFat(difference[i]! * toHz, i, fat, wrapLimitHz)) ? 1 : 0,
  );
  if (!others.includes(1)) return { ...all, mask: options.mask, wrapLimitHz };
  // Once more without them: they have pulled their neighbours' turns and guesses, and ring into those that touch them.
  const beside = grown(withoutSpecks(others, grid), grid);
  const mask = withoutSpecks(
    options.mask.map((flag, i) => flag & (1 - (others[i]! | beside[i]!))),
    grid,
  );
  return { ...fitLines(fit, difference, mask, grid, toHz), mask, wrapLimitHz };
}

function fitLines(fit: LineFit, difference: Float64Array, mask: Uint8Array, grid: VolumeSize, toHz: number) {
  const start = Float32Array.from(settleTurns(difference, mask, grid), (radians) => radians * toHz);
  const guess = fit.isFromMany ? smoothSlices(start, Float32Array.from(mask), grid, 1, false).fieldHz : start;
  const fieldHz = start.slice();
  const weights = new Float32Array(mask.length);
  const astray = new Uint8Array(mask.length);
  for (let i = 0; i < mask.length; i++) {
    if (!mask[i]) continue;
    fieldHz[i] = fit.fieldHz(i, guess[i]!);
    // The smoothed guess is less noisy; a pixel unlike its neighbours may follow a line from its own.
    if (fit.isAstray) fieldHz[i] = fit.fieldHz(i, start[i]!);
    astray[i] = fit.isAstray ? 1 : 0;
    weights[i] = fit.weight;
  }
  return { fieldHz, weights, astray };
}

/** Whether a pixel's field, between the closest echoes, is nearer to that of fat than to that of water; whole turns aside. */
function isFat(hz: number, pixel: number, fat: FatView | undefined, wrapLimitHz: number): boolean {
  if (!fat) return false;
  const turn = 2 * wrapLimitHz;
  const away = (value: number) => Math.abs(value - turn * Math.round(value / turn));
  const above = hz - fat.fieldHz[pixel]!;
  return away(above - fat.asFieldHz) < away(above);
}

/** `arg(second conj(first))`, radians, for each pixel. */
function phaseDifference(first: Float32Array, second: Float32Array): Float64Array {
  const out = new Float64Array(first.length / 2);
  for (let p = 0, i = 0; p < out.length; p++, i += 2) {
    const re = second[i]! * first[i]! + second[i + 1]! * first[i + 1]!;
    const im = second[i + 1]! * first[i]! - second[i]! * first[i + 1]!;
    out[p] = Math.atan2(im, re);
  }
  return out;
}

/**
 * Unwrapped phase with whole turns settled: the largest region so that its mean is nearest zero, each further one so
 * that it lies on the plane through the larger ones, those near it counting most.
 */
function settleTurns(difference: Float64Array, mask: Uint8Array, size: VolumeSize): Float64Array {
  const { radians, regions, regionCount } = unwrapPhase(difference, mask, size);
  const places = centresOf(radians, regions, regionCount, size);
  const every = Math.ceil(radians.length / SAMPLED);
  const samples = places.map((): Place[] => []);
  for (let i = 0; i < radians.length; i++) {
    const region = regions[i]!;
    if (region >= 0 && (i % every === 0 || samples[region]!.length === 0))
      samples[region]!.push(placeOf(i, radians[i]!, size));
  }
  const settled: Place[] = [];
  const shifts = places.map((place, region) => {
    const off = place.radians - (region === 0 ? 0 : planeAt(settled, place));
    const shift = wrapped(off) - off;
    for (const sample of samples[region]!) settled.push({ ...sample, radians: sample.radians + shift });
    return shift;
  });
  for (let i = 0; i < radians.length; i++) if (regions[i]! >= 0) radians[i]! += shifts[regions[i]!]!;
  return radians;
}

/** Pixels of a volume, evenly spread, that the planes go through. */
const SAMPLED = 8192;

interface Place {
  readonly x: number;
  readonly y: number;
  readonly z: number;
  readonly radians: number;
}

function placeOf(pixel: number, radians: number, { rows, columns }: VolumeSize): Place {
  const row = Math.floor(pixel / columns);
  return { x: pixel % columns, y: row % rows, z: Math.floor(row / rows), radians };
}

/** Mean place and mean phase of each region. */
function centresOf(
  radians: Float64Array,
  regions: Int32Array,
  regionCount: number,
  size: VolumeSize,
): Place[] {
  const sums = Array.from({ length: regionCount }, () => ({ count: 0, x: 0, y: 0, z: 0, radians: 0 }));
  for (let i = 0; i < radians.length; i++) {
    const sum = sums[regions[i]!];
    if (!sum) continue;
    const place = placeOf(i, radians[i]!, size);
    sum.count++;
    sum.x += place.x;
    sum.y += place.y;
    sum.z += place.z;
    sum.radians += place.radians;
  }
  return sums.map(({ count, x, y, z, radians: phase }) => ({
    x: x / count,
    y: y / count,
    z: z / count,
    radians: phase / count,
  }));
}

/** Least squares plane through some places, each by the inverse fourth power of its distance; its value at a place. */
function planeAt(places: readonly Place[], { x, y, z }: Place): number {
  const matrix = new Float64Array(16);
  const right = new Float64Array(4);
  for (const place of places) {
    const terms = [1, place.x - x, place.y - y, place.z - z];
    const square = terms[1]! ** 2 + terms[2]! ** 2 + terms[3]! ** 2;
    const weight = 1 / (square + 1) ** 2;
    for (let i = 0; i < 4; i++) {
      right[i]! += weight * terms[i]! * place.radians;
      for (let j = 0; j < 4; j++) matrix[4 * i + j]! += weight * terms[i]! * terms[j]!;
    }
  }
  // A slope along which the places hardly differ stays near zero.
  for (let i = 1; i < 4; i++) matrix[5 * i]! += 1e-3 * (matrix[5]! + matrix[10]! + matrix[15]!) + 1e-12;
  for (let k = 3; k > 0; k--) {
    // the slopes eliminated, one by one
    for (let i = 0; i < k; i++) {
      const share = matrix[4 * i + k]! / matrix[5 * k]!;
      right[i]! -= share * right[k]!;
      for (let j = 0; j < k; j++) matrix[4 * i + j]! -= share * matrix[4 * k + j]!;
    }
  }
  return right[0]! / matrix[0]!;
}

/** Share of the signal that may stray from the line before a pixel counts as not of one species: a tenth in amplitude. */
const ASTRAY_SHARE = 0.1 ** 2;
/** Normal deviate that noise alone exceeds once in a thousand pixels. */
const ASTRAY_DEVIATE = 3.09;

/**
 * Weighted least squares line through the phases of one pixel, after a guess of its slope is taken off, and through the
 * logarithms of its magnitudes: one species turns steadily and decays steadily, two of them beat.
 */
class LineFit {
  /** Inverse variance of the last field, 1 / Hz^2. */
  weight = 0;
  /** Whether there are more echoes than a line needs. */
  readonly isFromMany: boolean;
  /** Whether the last pixel strays from the lines by more than noise does, and by more than a tenth of its signal. */
  isAstray = false;
  readonly #phases: Float64Array;
  readonly #sizes: Float64Array;
  readonly #noiseLimit: number;

  constructor(
    private readonly echoes: readonly Float32Array[],
    private readonly echoSeconds: readonly number[],
    private readonly noiseDeviation: number,
  ) {
    this.isFromMany = echoes.length > 2;
    this.#phases = new Float64Array(echoes.length);
    this.#sizes = new Float64Array(echoes.length);
    this.#noiseLimit = chiSquareLimit(2 * (echoes.length - 2), ASTRAY_DEVIATE) * noiseDeviation ** 2;
  }

  /** @param guessHz near enough that the rest turns less than half from echo to echo */
  fieldHz(pixel: number, guessHz: number): number {
    const { echoes, echoSeconds } = this;
    let [total, meanTime, meanPhase] = [0, 0, 0];
    for (let e = 0; e < echoes.length; e++) {
      const re = echoes[e]![2 * pixel]!;
      const im = echoes[e]![2 * pixel + 1]!;
      const turned = Math.atan2(im, re) + 2 * Math.PI * guessHz * echoSeconds[e]!;
      this.#phases[e] = e === 0 ? turned : this.#phases[e - 1]! + wrapped(turned - this.#phases[e - 1]!);
      this.#sizes[e] = re * re + im * im;
      total += this.#sizes[e]!;
      meanTime += this.#sizes[e]! * echoSeconds[e]!;
      meanPhase += this.#sizes[e]! * this.#phases[e]!;
    }
    this.isAstray = false;
    if (total === 0) {
      this.weight = 0;
      return guessHz;
    }
    meanTime /= total;
    meanPhase /= total;
    let [slope, spread] = [0, 0];
    for (let e = 0; e < echoes.length; e++) {
      const time = echoSeconds[e]! - meanTime;
      slope += this.#sizes[e]! * time * (this.#phases[e]! - meanPhase);
      spread += this.#sizes[e]! * time * time;
    }
    slope /= spread;
    if (this.isFromMany) {
      const left =
        this.#leftByPhases(meanTime, meanPhase, slope) + this.#leftByLevels(total, meanTime, spread);
      this.isAstray = left > this.#noiseLimit && left > ASTRAY_SHARE * total;
    }
    this.weight = (spread * (2 * Math.PI) ** 2) / this.noiseDeviation ** 2;
    return guessHz - slope / (2 * Math.PI);
  }

  /** Signal, squared, that lies beside the line through the phases. */
  #leftByPhases(meanTime: number, meanPhase: number, slope: number): number {
    let left = 0;
    for (let e = 0; e < this.#sizes.length; e++) {
      const phase = this.#phases[e]! - meanPhase - slope * (this.echoSeconds[e]! - meanTime);
      left += this.#sizes[e]! * phase * phase;
    }
    return left;
  }

  /** Signal, squared, that lies above and below a steady decay. */
  #leftByLevels(total: number, meanTime: number, spread: number): number {
    const level = (e: number) => (this.#sizes[e]! > 0 ? Math.log(this.#sizes[e]!) / 2 : 0);
    let [mean, growth] = [0, 0];
    for (let e = 0; e < this.#sizes.length; e++) mean += (this.#sizes[e]! * level(e)) / total;
    for (let e = 0; e < this.#sizes.length; e++)
      growth += (this.#sizes[e]! * (this.echoSeconds[e]! - meanTime) * (level(e) - mean)) / spread;
    let left = 0;
    for (let e = 0; e < this.#sizes.length; e++)
      left += this.#sizes[e]! * (level(e) - mean - growth * (this.echoSeconds[e]! - meanTime)) ** 2;
    return left;
  }
}

/**
 * What the sum of squares of so many unit normal variables exceeds with the probability of a normal deviate.
 * Source: Wilson and Hilferty 1931, Proc Natl Acad Sci 17:684, doi:10.1073/pnas.17.12.684.
 */
function chiSquareLimit(degrees: number, deviate: number): number {
  if (degrees <= 0) return Number.POSITIVE_INFINITY;
  const share = 2 / (9 * degrees);
  return degrees * (1 - share + deviate * Math.sqrt(share)) ** 3;
}
