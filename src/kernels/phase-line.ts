import { smoothSlices } from "./smooth-field.js";
import { unwrapPhase, type VolumeSize, wrapped } from "./unwrap.js";

export interface PhaseLineOptions {
  /** Echo times, seconds, all different. */
  readonly echoSeconds: readonly number[];
  /** Standard deviation of the noise in the real (and in the imaginary) part. */
  readonly noiseDeviation: number;
  /** 1 where there is signal, [slices, rows, columns]. */
  readonly mask: Uint8Array;
}

export interface PhaseLine {
  /** Hz; not smoothed; meaningful where the weight is not 0. */
  readonly fieldHz: Float32Array;
  /** 1 / Hz^2, inverse variances; 0 outside the mask. */
  readonly weights: Float32Array;
  readonly wrapLimitHz: number;
}

/** Slope of the echoes' phases: unwrapped between the two closest echoes, then a weighted line through all of them. */
export function phaseLine(
  echoes: readonly Float32Array[],
  grid: VolumeSize,
  options: PhaseLineOptions,
): PhaseLine {
  const { echoSeconds, noiseDeviation, mask } = options;
  const { first, second, gapSeconds } = closestEchoes(echoSeconds);
  const difference = phaseDifference(echoes[first]!, echoes[second]!);
  const turns = settleTurns(difference, mask, grid);
  const start = Float32Array.from(turns, (radians) => -radians / (2 * Math.PI * gapSeconds));
  const fieldHz = start.slice();
  const weights = new Float32Array(mask.length);
  const guess =
    echoes.length > 2 ? smoothSlices(start, Float32Array.from(mask), grid, 1, false).fieldHz : start;
  const fit = new LineFit(echoes, echoSeconds, noiseDeviation);
  for (let i = 0; i < mask.length; i++) {
    if (!mask[i]) continue;
    fieldHz[i] = guess[i]! + fit.slopeHz(i, guess[i]!);
    weights[i] = fit.weight;
  }
  return { fieldHz, weights, wrapLimitHz: 1 / (2 * gapSeconds) };
}

/** Indices of the two echoes closest in time, the earlier one first. */
function closestEchoes(echoSeconds: readonly number[]): {
  first: number;
  second: number;
  gapSeconds: number;
} {
  const order = echoSeconds.map((_, e) => e).sort((a, b) => echoSeconds[a]! - echoSeconds[b]!);
  const gaps = order.slice(1).map((e, i) => echoSeconds[e]! - echoSeconds[order[i]!]!);
  const gapSeconds = Math.min(...gaps);
  if (!(gapSeconds > 0)) throw new RangeError(`echo times ${echoSeconds.join(", ")} s; must differ`);
  const at = gaps.indexOf(gapSeconds);
  return { first: order[at]!, second: order[at + 1]!, gapSeconds };
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
 * that it continues the larger ones across the gaps between them, or like the first where it sees none of them.
 */
function settleTurns(difference: Float64Array, mask: Uint8Array, size: VolumeSize): Float64Array {
  const { radians, regions, regionCount } = unwrapPhase(difference, mask, size);
  const sums = new Float64Array(regionCount);
  const counts = new Float64Array(regionCount);
  for (let i = 0; i < radians.length; i++) {
    if (regions[i]! < 0) continue;
    sums[regions[i]!]! += radians[i]!;
    counts[regions[i]!]!++;
  }
  const sights = regionCount > 1 ? sightsAcross(radians, regions, regionCount, size) : undefined;
  const shifts = new Float64Array(regionCount); // radians, whole turns
  for (let region = 0; region < regionCount; region++) {
    let [weight, jump] = [0, 0];
    for (const { other, weight: share, sum } of sights?.get(region) ?? []) {
      weight += share;
      jump += sum - share * shifts[other]!;
    }
    const off = weight > 0 ? jump / weight : sums[region]! / counts[region]!;
    shifts[region] = wrapped(off) - off;
  }
  for (let i = 0; i < radians.length; i++) if (regions[i]! >= 0) radians[i]! += shifts[regions[i]!]!;
  return radians;
}

interface Sight {
  /** A region with a lower number, so a larger one. */
  readonly other: number;
  weight: number;
  /** Weighted radians by which this region lies above the straight continuation of the other. */
  sum: number;
}

/** For each region what it sees of larger ones along rows, columns and slices, near ones counting more. */
function sightsAcross(
  radians: Float64Array,
  regions: Int32Array,
  regionCount: number,
  { slices, rows, columns }: VolumeSize,
): Map<number, Sight[]> {
  const found = new Map<number, Sight>();
  const strides = [1, columns, rows * columns];
  const lengths = [columns, rows, slices];
  for (let axis = 0; axis < 3; axis++) {
    const [stride, length] = [strides[axis]!, lengths[axis]!];
    for (let start = 0; start < radians.length; start++) {
      if (Math.floor(start / stride) % length !== 0) continue; // lines start where the index along the axis is 0
      let last = -1;
      for (let step = 0, i = start; step < length; step++, i += stride) {
        if (regions[i]! < 0) continue;
        if (last >= 0 && regions[last] !== regions[i]) {
          addSight(radians, regions, regionCount, last, i, stride, length - step > 1, found);
        }
        last = i;
      }
    }
  }
  const out = new Map<number, Sight[]>();
  for (const [key, sight] of found) {
    const region = Math.floor(key / regionCount);
    out.set(region, [...(out.get(region) ?? []), sight]);
  }
  return out;
}

function addSight(
  radians: Float64Array,
  regions: Int32Array,
  regionCount: number,
  from: number,
  to: number,
  stride: number,
  more: boolean,
  found: Map<number, Sight>,
): void {
  const gap = (to - from) / stride;
  const before =
    regions[from - stride] === regions[from] ? radians[from]! - radians[from - stride]! : undefined;
  const after =
    more && regions[to + stride] === regions[to] ? radians[to + stride]! - radians[to]! : undefined;
  const slope = ((before ?? after ?? 0) + (after ?? before ?? 0)) / 2;
  const above = radians[to]! - radians[from]! - gap * slope;
  const [low, high, sign] = regions[from]! < regions[to]! ? [from, to, 1] : [to, from, -1];
  const key = regions[high]! * regionCount + regions[low]!;
  const sight = found.get(key) ?? { other: regions[low]!, weight: 0, sum: 0 };
  found.set(key, sight);
  sight.weight += 1 / (gap * gap);
  sight.sum += (sign * above) / (gap * gap);
}

/** Weighted least squares line through the phases of one pixel, after a guess of its slope is taken off. */
class LineFit {
  /** Inverse variance of the last slope, 1 / Hz^2. */
  weight = 0;
  readonly #phases: Float64Array;
  readonly #sizes: Float64Array;

  constructor(
    private readonly echoes: readonly Float32Array[],
    private readonly echoSeconds: readonly number[],
    private readonly noiseDeviation: number,
  ) {
    this.#phases = new Float64Array(echoes.length);
    this.#sizes = new Float64Array(echoes.length);
  }

  /** @returns Hz to add to the guess */
  slopeHz(pixel: number, guessHz: number): number {
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
    if (total === 0) {
      this.weight = 0;
      return 0;
    }
    meanTime /= total;
    meanPhase /= total;
    let [slope, spread] = [0, 0];
    for (let e = 0; e < echoes.length; e++) {
      const time = echoSeconds[e]! - meanTime;
      slope += this.#sizes[e]! * time * (this.#phases[e]! - meanPhase);
      spread += this.#sizes[e]! * time * time;
    }
    this.weight = (spread * (2 * Math.PI) ** 2) / this.noiseDeviation ** 2;
    return -slope / (2 * Math.PI * spread);
  }
}
