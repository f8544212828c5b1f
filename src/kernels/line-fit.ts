import { wrapped } from "./unwrap.js";

/** Share of the signal that may stray from the line before a pixel counts as not of one species: a tenth in amplitude. */
const ASTRAY_SHARE = 0.1 ** 2;
/** Normal deviate that noise alone exceeds once in a thousand pixels. */
const ASTRAY_DEVIATE = 3.09;

/**
 * Weighted least squares line through the phases of one pixel, after a guess of its slope is taken off, and through the
 * logarithms of its magnitudes: one species turns steadily and decays steadily, two of them beat.
 */
export class LineFit {
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

  /** Whether a pixel's echoes follow no line, with a guess of its slope as for `fieldHz`. */
  strays(pixel: number, guessHz: number): boolean {
    this.fieldHz(pixel, guessHz);
    return this.isAstray;
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
