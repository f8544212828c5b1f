import { noiseFactor, type WindowShape, type WindowSpec, windowGain } from "./window.js";

/**
 * What a window does along one image axis. Positions are in nominal pixels, FOV/N (one bin of the window's spectrum).
 * In 2-D and 3-D a point and a straight edge see different weights: the spread of a point is the transform of the gains
 * summed over the other axes, that of an edge across this axis the transform of the gains at k = 0 of the other axes.
 */
export interface AxisWindow {
  /** Gains summed over the other axes, at `firstCyclesPerPixel + j * stepCyclesPerPixel`. */
  readonly pointWeights: Float64Array;
  /** Gains at k = 0 of the other axes, at the same frequencies. */
  readonly edgeWeights: Float64Array;
  readonly firstCyclesPerPixel: number;
  readonly stepCyclesPerPixel: number;
  /** Mean gain over the whole grid. */
  readonly coherentGain: number;
  /** sqrt of the mean squared gain over the whole grid. */
  readonly noiseFactor: number;
  /** True for the limit of many samples, where positions go on for ever; else they repeat after N pixels. */
  readonly continuous: boolean;
}

export interface WindowFigures {
  /** Mean gain. */
  readonly coherentGain: number;
  /** Mean squared gain over squared mean gain, in bins; 1 without a window. */
  readonly equivalentNoiseBandwidthBins: number;
  /** Full width of the point spread where it has fallen by 3 dB (10^-0.15), and by 6 dB (10^-0.3), in pixels. */
  readonly width3DbPixels: number;
  readonly width6DbPixels: number;
  /** Full width at half of the point spread's amplitude. */
  readonly pointFwhmPixels: number;
  /** The same of the line spread, which an edge profile measures; differs from the point's for a radial window. */
  readonly lineFwhmPixels: number;
  /** Highest side lobe of the point spread within 12 pixels of the main lobe, negative dB; -Infinity without one. */
  readonly highestSideLobeDb: number;
  /** Fall of the lobes' rms from 32..64 to 64..128 pixels; only in the limit of many samples, else null. */
  readonly sideLobeFallOffDbPerOctave: number | null;
  /** Factor on the noise standard deviation, the transform being unitary. */
  readonly noiseFactor: number;
  /** Factor on the SNR of a large flat region, and of a point (never above 1). */
  readonly flatSnrGain: number;
  readonly pointSnrGain: number;
  /**
   * Beside a straight edge, on its bright side, as fractions of the jump: how far the highest peak lies above the plateau,
   * and how far the trough behind it lies below. The dark side mirrors them for a window even in k, but a magnitude
   * image folds it at zero; so the bright side is the one to compare with.
   */
  readonly edgeOvershoot: number;
  readonly edgeUndershoot: number;
}

/** Frequencies that stand for the continuous limit; midpoints, so that errors fall with the square of their number. */
const CONTINUOUS_NODES = 8192;
/** Steps across the second axis of a radial window, for each of these. */
const CHORD_NODES = 256;
/** Step of searches for extrema, which a parabola then refines. */
const SEARCH_STEP_PIXELS = 0.02;

/**
 * A window in the limit of many samples, h = N/2.
 * @param shape      radial: the gains of a disc (ball), 0 beyond r = 1; their sum over the other axes is an Abel
 *                   transform, whose Fourier transform is the Hankel transform of the window
 * @param dimensions 1, 2 or 3 windowed axes
 * Source: Bracewell, The Fourier Transform and Its Applications (the Abel-Fourier-Hankel cycle).
 */
export function continuousWindow(
  spec: WindowSpec,
  shape: WindowShape = "separable",
  dimensions = 1,
): AxisWindow {
  const edgeWeights = new Float64Array(CONTINUOUS_NODES);
  const pointWeights = new Float64Array(CONTINUOUS_NODES);
  const powerWeights = new Float64Array(CONTINUOUS_NODES);
  const radial = shape !== "separable" && dimensions > 1;
  for (let j = 0; j < CONTINUOUS_NODES / 2; j++) {
    const mirror = CONTINUOUS_NODES - 1 - j;
    const u = 1 - (2 * j + 1) / CONTINUOUS_NODES;
    const gain = windowGain(spec, u);
    const [point, power] = radial ? chordMeans(spec, u, dimensions) : [gain, gain * gain];
    edgeWeights[j] = edgeWeights[mirror] = gain;
    pointWeights[j] = pointWeights[mirror] = point;
    powerWeights[j] = powerWeights[mirror] = power;
  }
  const axes = radial ? 1 : dimensions; // the chords of a radial window already hold the other axes
  return {
    pointWeights,
    edgeWeights,
    firstCyclesPerPixel: -0.5 + 0.5 / CONTINUOUS_NODES,
    stepCyclesPerPixel: 1 / CONTINUOUS_NODES,
    coherentGain: mean(pointWeights) ** axes,
    noiseFactor: Math.sqrt(mean(powerWeights) ** axes),
    continuous: true,
  };
}

/** Mean gain and mean squared gain of a radial window over the other axes (-1 .. 1 each) at u along this one. */
function chordMeans(spec: WindowSpec, u: number, dimensions: number): [number, number] {
  const reach = Math.sqrt(1 - u * u);
  let point = 0;
  let power = 0;
  for (let i = 0; i < CHORD_NODES; i++) {
    const across = (reach * (i + 0.5)) / CHORD_NODES;
    const gain = windowGain(spec, Math.sqrt(u * u + across * across));
    const share = dimensions === 2 ? 1 : (Math.PI / 2) * across; // of a line -1 .. 1, of a square
    point += gain * share;
    power += gain * gain * share;
  }
  const step = reach / CHORD_NODES;
  return [point * step, power * step];
}

/**
 * A window as sampled: gains in C order on a grid of `lengths`, k = 0 at floor(N/2) of each axis, 0 where nothing was
 * acquired.
 * @param axis the image axis that the figures are for; the last one by default
 */
export function sampledWindow(
  gains: Float64Array,
  lengths: readonly number[] = [gains.length],
  axis = lengths.length - 1,
): AxisWindow {
  const length = lengths[axis]!;
  const inner = lengths.slice(axis + 1).reduce((product, n) => product * n, 1);
  const pointWeights = new Float64Array(length);
  for (let i = 0; i < gains.length; i++) pointWeights[Math.floor(i / inner) % length]! += gains[i]!;
  let centre = 0; // index of k = 0 on every axis but this one
  for (const [a, n] of lengths.entries()) centre = centre * n + (a === axis ? 0 : Math.floor(n / 2));
  const edgeWeights = new Float64Array(length);
  for (let i = 0; i < length; i++) edgeWeights[i] = gains[centre + i * inner]!;
  return {
    pointWeights,
    edgeWeights,
    firstCyclesPerPixel: -Math.floor(length / 2) / length,
    stepCyclesPerPixel: 1 / length,
    coherentGain: mean(gains),
    noiseFactor: noiseFactor(gains),
    continuous: false,
  };
}

/**
 * Magnitude of the point spread at each position, 1 at 0.
 * @param positionsPixels nominal pixels from the point
 */
export function pointSpread(window: AxisWindow, positionsPixels: Float64Array): Float64Array {
  const spread = spreadFunction(window, window.pointWeights);
  return positionsPixels.map((x) => spread(x));
}

/**
 * Magnitude of the image of a straight edge from 0 (negative positions) to 1, with the gain at k = 0 taken as 1.
 * @param positionsPixels nominal pixels from the edge
 */
export function edgeResponse(window: AxisWindow, positionsPixels: Float64Array): Float64Array {
  const response = edgeFunction(window);
  return positionsPixels.map((x) => response(x));
}

/** All figures of a window along its axis. */
export function windowFigures(window: AxisWindow): WindowFigures {
  const spread = spreadFunction(window, window.pointWeights);
  const lineSpread = spreadFunction(window, window.edgeWeights);
  const limitPixels = window.continuous ? Number.POSITIVE_INFINITY : 0.5 / window.stepCyclesPerPixel;
  const pointFwhmPixels = fullWidth(spread, 0.5, limitPixels);
  const lineFwhmPixels = fullWidth(lineSpread, 0.5, limitPixels);
  const pointSnrGain = window.coherentGain / window.noiseFactor;
  return {
    coherentGain: window.coherentGain,
    equivalentNoiseBandwidthBins: 1 / pointSnrGain ** 2,
    width3DbPixels: fullWidth(spread, 10 ** -0.15, limitPixels),
    width6DbPixels: fullWidth(spread, 10 ** -0.3, limitPixels),
    pointFwhmPixels,
    lineFwhmPixels,
    highestSideLobeDb: highestSideLobeDb(spread, pointFwhmPixels, limitPixels),
    sideLobeFallOffDbPerOctave: window.continuous
      ? 20 * Math.log10(rmsBetween(spread, 32, 64) / rmsBetween(spread, 64, 128))
      : null,
    noiseFactor: window.noiseFactor,
    flatSnrGain: 1 / window.noiseFactor,
    pointSnrGain,
    ...edgeRinging(edgeFunction(window), Math.min(limitPixels, 2 * lineFwhmPixels + 6)),
  };
}

/** |sum_j w_j exp(2 pi i f_j x)| / |sum_j w_j|, the exponential turned from one frequency to the next. */
function spreadFunction(window: AxisWindow, weights: Float64Array): (xPixels: number) => number {
  const total = mean(weights) * weights.length;
  return (xPixels) => {
    const [re, im] = turnedSum(weights, window, xPixels);
    return Math.hypot(re, im) / Math.abs(total);
  };
}

/**
 * The running integral of the line spread: with g the gain at k = 0 it is
 * `1/2 + (1/g) sum_j w_j exp(2 pi i f_j x) / (2 pi i f_j) df`, the term of f = 0 being x df.
 */
function edgeFunction(window: AxisWindow): (xPixels: number) => number {
  const { edgeWeights, firstCyclesPerPixel, stepCyclesPerPixel } = window;
  const middle = Math.floor(edgeWeights.length / 2); // k = 0, or the first frequency above it
  const gain = window.continuous ? 1 : edgeWeights[middle]!;
  const sampledZero = window.continuous ? 0 : stepCyclesPerPixel;
  const integrals = edgeWeights.map((weight, j) => {
    const frequency = firstCyclesPerPixel + j * stepCyclesPerPixel;
    return !window.continuous && j === middle
      ? 0
      : (weight / gain / (2 * Math.PI * frequency)) * stepCyclesPerPixel;
  });
  return (xPixels) => {
    const [re, im] = turnedSum(integrals, window, xPixels);
    return Math.hypot(0.5 + sampledZero * xPixels + im, re); // (re + i im) / i = im - i re
  };
}

function turnedSum(weights: Float64Array, window: AxisWindow, xPixels: number): [number, number] {
  const start = 2 * Math.PI * window.firstCyclesPerPixel * xPixels;
  const turn = 2 * Math.PI * window.stepCyclesPerPixel * xPixels;
  const turnRe = Math.cos(turn);
  const turnIm = Math.sin(turn);
  let re = Math.cos(start);
  let im = Math.sin(start);
  let sumRe = 0;
  let sumIm = 0;
  for (let j = 0; j < weights.length; j++) {
    const weight = weights[j]!;
    sumRe += weight * re;
    sumIm += weight * im;
    const next = re * turnRe - im * turnIm;
    im = re * turnIm + im * turnRe;
    re = next;
  }
  return [sumRe, sumIm];
}

/** Full width of an even spread where it first falls below `level`; Infinity if it does not before `limitPixels`. */
function fullWidth(spread: (x: number) => number, level: number, limitPixels: number): number {
  let high = SEARCH_STEP_PIXELS;
  while (spread(high) >= level) {
    high += SEARCH_STEP_PIXELS;
    if (high > limitPixels) return Number.POSITIVE_INFINITY;
  }
  let low = high - SEARCH_STEP_PIXELS;
  for (let halving = 0; halving < 40; halving++) {
    const middle = (low + high) / 2;
    if (spread(middle) >= level) low = middle;
    else high = middle;
  }
  return low + high;
}

/** The highest value beyond the first minimum after the main lobe's half width, over the 12 pixels that follow it. */
function highestSideLobeDb(spread: (x: number) => number, fwhmPixels: number, limitPixels: number): number {
  let x = fwhmPixels / 2;
  if (x > limitPixels) return Number.NEGATIVE_INFINITY; // no main lobe either
  let value = spread(x);
  let before = Number.POSITIVE_INFINITY;
  while (value < before) {
    before = value;
    x += SEARCH_STEP_PIXELS;
    if (x > limitPixels) return Number.NEGATIVE_INFINITY;
    value = spread(x);
  }
  const peak = extremum(spread, x, Math.min(x + 12, limitPixels), Math.max);
  return 20 * Math.log10(peak.value);
}

function rmsBetween(spread: (x: number) => number, fromPixels: number, toPixels: number): number {
  // Quarter pixels meet every lobe, one pixel wide, at all phases.
  const count = (toPixels - fromPixels) * 4;
  let sum = 0;
  for (let i = 0; i < count; i++) sum += spread(fromPixels + (i + 0.5) / 4) ** 2;
  return Math.sqrt(sum / count);
}

function edgeRinging(
  response: (x: number) => number,
  limitPixels: number,
): { edgeOvershoot: number; edgeUndershoot: number } {
  const peak = extremum(response, 0, limitPixels, Math.max);
  const edgeOvershoot = Math.max(0, peak.value - 1);
  // A response that only climbs has no trough: what lies behind its highest place is not yet the plateau.
  if (edgeOvershoot === 0) return { edgeOvershoot, edgeUndershoot: 0 };
  let end = peak.at + SEARCH_STEP_PIXELS;
  while (end < limitPixels && response(end + SEARCH_STEP_PIXELS) < response(end)) end += SEARCH_STEP_PIXELS;
  const trough = extremum(response, peak.at, end + SEARCH_STEP_PIXELS, Math.min);
  return { edgeOvershoot, edgeUndershoot: Math.max(0, 1 - trough.value) };
}

/** Highest or lowest value on an interval: the best of evenly spaced samples, refined by the parabola through three. */
function extremum(
  f: (x: number) => number,
  from: number,
  to: number,
  choose: (a: number, b: number) => number,
): { at: number; value: number } {
  let at = from;
  let best = f(from);
  const count = Math.floor((to - from) / SEARCH_STEP_PIXELS);
  for (let i = 1; i <= count; i++) {
    const value = f(from + i * SEARCH_STEP_PIXELS);
    if (choose(value, best) === best) continue;
    best = value;
    at = from + i * SEARCH_STEP_PIXELS;
  }
  const left = f(at - SEARCH_STEP_PIXELS);
  const right = f(at + SEARCH_STEP_PIXELS);
  const bend = left - 2 * best + right;
  if (bend === 0 || choose(left, best) === left || choose(right, best) === right) return { at, value: best };
  const offset = (left - right) / (2 * bend);
  return { at: at + offset * SEARCH_STEP_PIXELS, value: best - ((left - right) * offset) / 4 };
}

function mean(values: Float64Array): number {
  let sum = 0;
  for (const value of values) sum += value;
  return sum / values.length;
}
