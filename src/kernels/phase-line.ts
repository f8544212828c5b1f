import { closestEchoes, turnHz } from "./echo-times.js";
import { LineFit } from "./line-fit.js";
import { settleTurns } from "./settle-turns.js";
import { grown, withoutSpecks } from "./signal-mask.js";
import { smoothSlices } from "./smooth-field.js";
import type { VolumeSize } from "./unwrap.js";

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
  const start = { difference, toHz, offsetHz: 0 };
  const astray = areAligned && fit.isFromMany ? strayPixels(fit, start, options, grid) : undefined;
  const others = options.mask.map((flag, i) =>
    flag && (astray?.[i] || isFat(difference[i]! * toHz, i, fat, wrapLimitHz)) ? 1 : 0,
  );
  if (!others.includes(1))
    return { ...fitLines(fit, start, options.mask, grid), mask: options.mask, wrapLimitHz };
  // They would pull their neighbours' turns and guesses, and they ring into those that touch them.
  const beside = grown(withoutSpecks(others, grid), grid);
  const mask = withoutSpecks(
    options.mask.map((flag, i) => flag & (1 - (others[i]! | beside[i]!))),
    grid,
  );
  return { ...fitLines(fit, start, mask, grid), mask, wrapLimitHz };
}

/** Pixels whose echoes follow no line. Where echoes are unevenly spaced they do in one turn only, which `start` is given. */
function strayPixels(
  fit: LineFit,
  start: Start,
  { echoSeconds, mask }: PhaseLineOptions,
  grid: VolumeSize,
): Uint8Array {
  const isEven = turnHz(echoSeconds, new Array<number>(echoSeconds.length).fill(1)) !== undefined;
  if (isEven)
    return mask.map((flag, i) => (flag && fit.strays(i, start.difference[i]! * start.toHz) ? 1 : 0));
  let least = fitLines(fit, start, mask, grid).astray;
  if (2 * count(least) <= count(mask)) return least;
  const turn = 2 * Math.PI * start.toHz;
  for (const offsetHz of [turn, -turn]) {
    const { astray } = fitLines(fit, { ...start, offsetHz }, mask, grid);
    if (2 * count(astray) > count(least)) continue;
    least = astray;
    start.offsetHz = offsetHz;
  }
  return least;
}

const count = (mask: Uint8Array) => mask.reduce((sum, flag) => sum + flag, 0);

interface Start {
  /** Phase between the closest echoes, radians, and the field that one of them stands for. */
  readonly difference: Float64Array;
  readonly toHz: number;
  /** Whole turns, as a field, that are added to the one nearest zero. */
  offsetHz: number;
}

function fitLines(fit: LineFit, { difference, toHz, offsetHz }: Start, mask: Uint8Array, grid: VolumeSize) {
  const settled = settleTurns(difference, mask, grid);
  const start = Float32Array.from(settled, (radians) => radians * toHz + offsetHz);
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
