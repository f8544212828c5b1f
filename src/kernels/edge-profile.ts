/** A magnitude image, [height, width] in C order. */
export interface EdgeImage {
  readonly data: Float32Array | Float64Array;
  readonly height: number;
  readonly width: number;
  /**
   * The complex images that `data` is the root sum of squares of: interleaved re, im, [channel, height, width].
   * Magnitudes fold the ringing of a dark side at zero, and a folded line cannot be interpolated well: the width of
   * an edge against air is then wrong by up to a tenth, its overshoot by a fifth. Complex values are interpolated first.
   */
  readonly channels?: Float32Array | Float64Array | undefined;
}

export interface EdgeOptions {
  /** How far the profile reaches to each side; the plateaus are taken from its outer half. Default 10. */
  readonly reachPixels?: number;
  /** Lines averaged to each side of the middle one. Default 8. */
  readonly sideLines?: number;
}

/** A strong, nearly straight edge across the rows (axis "x") or the columns (axis "y") of an image. */
export interface Edge {
  /** The axis that the profile runs along. */
  readonly axis: "x" | "y";
  /** Index of the middle line: a row for axis "x", a column for axis "y". */
  readonly line: number;
  /** The edge on line `line + t` lies at `offset + slope t + bend t^2`, in pixels along the axis, the first at 0. */
  readonly offsetPixels: number;
  readonly slope: number;
  readonly bend: number;
  /** True when the image brightens along the axis. */
  readonly rising: boolean;
  /** Mean levels to both sides, in the image's unit. */
  readonly darkLevel: number;
  readonly brightLevel: number;
  /** True when the dark level is below a tenth of the jump, so that ringing may pass zero there. */
  readonly folded: boolean;
  /** Root mean square distance of the lines' own edges from the fitted curve. */
  readonly residualPixels: number;
  /** Standard deviation of the image's values about the two levels; small where both sides are flat. */
  readonly plateauDeviation: number;
}

export interface EdgeProfile {
  /** Distances from the edge at right angles to it, image pixels, negative on the dark side; evenly spaced. */
  readonly distancesPixels: Float64Array;
  /** Mean over the lines; 0 is the dark level and 1 the bright one, its slope by shading taken off. */
  readonly values: Float64Array;
  /** Slope of the bright side that was taken off, of the jump per pixel; 0 where it was too small to tell from ringing. */
  readonly shadingPerPixel: number;
  /** Mean levels of the plateaus, in the image's unit. */
  readonly darkLevel: number;
  readonly brightLevel: number;
}

export interface EdgeFigures {
  /** Full width at half maximum of the profile's derivative, image pixels: the effective resolution. */
  readonly fwhmPixels: number;
  /** First peak behind the edge above the bright level, and the first trough below it, as fractions of the jump. */
  readonly overshoot: number;
  readonly undershoot: number;
}

const DEFAULT_REACH_PIXELS = 10;
const DEFAULT_SIDE_LINES = 8;
/** Samples of a profile per image pixel. */
const OVERSAMPLING = 16;
/** tan of 10 degrees: more tilt, and the profile no longer shows the resolution along one axis. */
const STEEPEST_SLOPE = 0.176;

/**
 * The strongest edge that is straight and has flat sides, along either axis; undefined where there is none.
 *
 * Every line's local maximum of the slope, summed over neighbouring lines so that only straight edges add up, is tried;
 * the best is the one of the largest jump, less twice the unevenness of its sides, less what it strays from a smooth
 * curve; an edge against nothing counts half, because a magnitude image folds its dark side. Equal ones: the first in
 * order of axis (x, y), line and position.
 */
export function findEdge(image: EdgeImage, options: EdgeOptions = {}): Edge | undefined {
  let best: Edge | undefined;
  for (const axis of ["x", "y"] as const) {
    const lines = alongAxis(image, axis);
    for (const [line, position] of candidates(lines, options)) {
      const edge = fitEdge(lines, axis, line, position, options);
      if (edge && (!best || merit(edge) > merit(best))) best = edge;
    }
  }
  return best && merit(best) > 0 ? refined(image, best, options) : undefined;
}

/**
 * The edge nearest to a place, for one who knows where it is; undefined where the two sides do not differ, or where it
 * tilts by more than 10 degrees against the other axis.
 * @param line           row (axis "x") or column (axis "y") in the middle of the lines to average
 * @param positionPixels along the axis, the first pixel at 0
 */
export function edgeAt(
  image: EdgeImage,
  axis: "x" | "y",
  line: number,
  positionPixels: number,
  options: EdgeOptions = {},
): Edge | undefined {
  const edge = fitEdge(alongAxis(image, axis), axis, line, Math.round(positionPixels), options);
  return edge && refined(image, edge, options);
}

/**
 * The profile across an edge, 16 samples per pixel: each line interpolated as the band-limited periodic function that
 * it is, shifted by its own place on the fitted edge, and averaged. Where the bright side slopes, as the coils shade it,
 * by 1 to 20 % of the jump from its plateau to the edge, it is divided by that line.
 * Source: the slanted-edge method of ISO 12233, with Fourier interpolation in place of bins, which also serves an edge
 * along the pixels.
 */
export function edgeProfile(image: EdgeImage, edge: Edge, options: EdgeOptions = {}): EdgeProfile {
  const { reachPixels = DEFAULT_REACH_PIXELS, sideLines = DEFAULT_SIDE_LINES } = options;
  const half = Math.floor(reachPixels * OVERSAMPLING);
  const distancesPixels = Float64Array.from({ length: 2 * half + 1 }, (_, i) => (i - half) / OVERSAMPLING);
  const sums = new Float64Array(distancesPixels.length);
  for (let t = -sideLines; t <= sideLines; t++)
    for (let i = 0; i < sums.length; i++) sums[i]! += valueAcross(image, edge, t, distancesPixels[i]!);
  const means = sums.map((sum) => sum / (2 * sideLines + 1));
  const darkLevel = plateau(means, 0, Math.floor(half / 2));
  const brightLevel = plateau(means, means.length - 1 - Math.floor(half / 2), means.length - 1);
  const values = means.map((value) => (value - darkLevel) / (brightLevel - darkLevel));
  const plateauCentre = means.length - 1 - Math.floor(half / 2) / 2;
  const shadingPerPixel =
    shadingSlope(image, edge, sideLines, reachPixels, (plateauCentre - half) / OVERSAMPLING) /
    (brightLevel - darkLevel);
  const slope = shadingPerPixel / OVERSAMPLING;
  return {
    distancesPixels,
    values: values.map((value, i) => value / (1 + slope * (Math.max(i, half) - plateauCentre))),
    shadingPerPixel,
    darkLevel,
    brightLevel,
  };
}

/**
 * Changes of the bright level from the plateau to the edge, of the jump, that count as shading: ringing itself can tilt
 * the line by half of the least, and beyond the most there is another edge.
 */
const LEAST_TILT = 0.01;
const MOST_TILT = 0.2;
/** Standard errors, from the lines' own slopes, that a slope must exceed. */
const SURE_ERRORS = 2;
/** Lines that the slope is taken from, against those of the profile: it needs no sharp edge. */
const MORE_LINES = 3;
const SLOPE_SAMPLES = 4; // per pixel

/**
 * The slope of the bright side that the lines around an edge agree on, in the image's unit per pixel; 0 where noise,
 * ringing or another edge may have made it.
 */
function shadingSlope(
  image: EdgeImage,
  edge: Edge,
  sideLines: number,
  reachPixels: number,
  toPlateauPixels: number,
): number {
  const { count } = alongAxis(image, edge.axis);
  const most = Math.min(MORE_LINES * sideLines, edge.line, count - 1 - edge.line);
  const slopes: number[] = [];
  for (let t = -most; t <= most; t++) {
    const bright = Float64Array.from({ length: Math.floor(reachPixels * SLOPE_SAMPLES) + 1 }, (_, i) =>
      valueAcross(image, edge, t, i / SLOPE_SAMPLES),
    );
    slopes.push(SLOPE_SAMPLES * plateauSlope(bright));
  }
  const mean = slopes.reduce((sum, slope) => sum + slope, 0) / slopes.length;
  const change = Math.abs(mean * toPlateauPixels) / (edge.brightLevel - edge.darkLevel);
  if (!(change > LEAST_TILT && change < MOST_TILT) || slopes.length < 3) return 0;
  const variance = slopes.reduce((sum, slope) => sum + (slope - mean) ** 2, 0) / (slopes.length - 1);
  return Math.abs(mean) > SURE_ERRORS * Math.sqrt(variance / slopes.length) ? mean : 0;
}

/** The image beside the edge on line `edge.line + t`: so far from it at right angles, positive on the bright side. */
function valueAcross(image: EdgeImage, edge: Edge, t: number, distancePixels: number): number {
  const middle = edge.offsetPixels + edge.slope * t + edge.bend * t * t;
  // Along a line, distances at right angles to the edge are stretched by the edge's tilt.
  const stretch = (edge.rising ? 1 : -1) * Math.hypot(1, edge.slope + 2 * edge.bend * t);
  return interpolated(image, edge.axis, edge.line + t, middle + stretch * distancePixels);
}

/**
 * Effective resolution and ringing of a profile: overshoot and undershoot are the first peak and the first trough behind
 * the edge. Noise adds to both; average lines until it is small.
 */
export function edgeFigures({
  distancesPixels,
  values,
  darkLevel,
  brightLevel,
}: Omit<EdgeProfile, "shadingPerPixel">): EdgeFigures {
  const step = distancesPixels[1]! - distancesPixels[0]!;
  const middle = (values.length - 1) / 2;
  const spread = new Float64Array(values.length); // the line spread, per pixel
  for (let i = 1; i < values.length - 1; i++) spread[i] = (values[i + 1]! - values[i - 1]!) / (2 * step);
  // The steepest place lies within a pixel of the half level.
  let top = middle;
  for (let i = middle - OVERSAMPLING; i <= middle + OVERSAMPLING; i++) if (spread[i]! > spread[top]!) top = i;
  const bright = halfWidthSteps(spread, top, 1);
  // A folded dark side bends the profile where the spread has fallen to half: twice the bright side then, from the edge.
  const wide = isFolded(darkLevel, brightLevel)
    ? 2 * (top + bright - halfLevelStep(values))
    : bright + halfWidthSteps(spread, top, -1);
  return { fwhmPixels: wide * step, ...ringing(values, middle) };
}

/** @param middle index of the edge */
function ringing(values: Float64Array, middle: number): { overshoot: number; undershoot: number } {
  const last = values.length - 1;
  let peak = middle;
  while (peak < last && values[peak + 1]! > values[peak]!) peak++;
  const overshoot = Math.max(0, values[peak]! - 1);
  if (overshoot === 0) return { overshoot, undershoot: 0 };
  let trough = peak;
  while (trough < last && values[trough + 1]! <= values[trough]!) trough++;
  return { overshoot, undershoot: Math.max(0, 1 - values[trough]!) };
}

/** The image seen as lines along an axis: value(line, position) = data[line * lineStep + position * step]. */
interface Lines {
  readonly data: Float32Array | Float64Array;
  readonly count: number;
  readonly length: number;
  readonly lineStep: number;
  readonly step: number;
}

function alongAxis({ data, height, width }: EdgeImage, axis: "x" | "y"): Lines {
  return axis === "x"
    ? { data, count: height, length: width, lineStep: width, step: 1 }
    : { data, count: width, length: height, lineStep: 1, step: width };
}

/** Places where the slope, summed over the lines of a profile, is largest along a line and at least 0.3 of the best. */
function candidates(lines: Lines, options: EdgeOptions): [line: number, position: number][] {
  const { reachPixels = DEFAULT_REACH_PIXELS, sideLines = DEFAULT_SIDE_LINES } = options;
  const { data, count, length, lineStep, step } = lines;
  const reach = Math.ceil(reachPixels);
  const slopes = new Float64Array(count * length);
  let steepest = 0;
  for (let line = sideLines; line < count - sideLines; line++) {
    for (let x = reach; x < length - reach; x++) {
      let sum = 0;
      for (let t = line - sideLines; t <= line + sideLines; t++) {
        const at = t * lineStep + x * step;
        sum += data[at + step]! - data[at - step]!;
      }
      slopes[line * length + x] = Math.abs(sum);
      steepest = Math.max(steepest, Math.abs(sum));
    }
  }
  const places: [number, number][] = [];
  for (let line = sideLines; line < count - sideLines; line++) {
    for (let x = reach; x < length - reach; x++) {
      const slope = slopes[line * length + x]!;
      const [before, after] = [slopes[line * length + x - 1]!, slopes[line * length + x + 1]!];
      if (slope > 0.3 * steepest && slope >= before && slope > after) places.push([line, x]);
    }
  }
  return places;
}

function fitEdge(
  lines: Lines,
  axis: "x" | "y",
  line: number,
  position: number,
  options: EdgeOptions,
): Edge | undefined {
  const { reachPixels = DEFAULT_REACH_PIXELS, sideLines = DEFAULT_SIDE_LINES } = options;
  const reach = Math.floor(reachPixels);
  if (line < sideLines || line + sideLines >= lines.count) return undefined;
  if (position < reach || position + reach >= lines.length) return undefined;
  const inner = Math.ceil(reach / 2);
  const below = sideStatistics(lines, line, sideLines, position - reach, position - inner);
  const above = sideStatistics(lines, line, sideLines, position + inner, position + reach);
  const middleLevel = (below.mean + above.mean) / 2;
  const crossings = new Float64Array(2 * sideLines + 1);
  for (let t = -sideLines; t <= sideLines; t++) {
    crossings[t + sideLines] = crossing(lines, line + t, position, inner, middleLevel);
  }
  const curve = fitParabola(crossings);
  // A line without a crossing makes all of these NaN.
  if (!(Math.abs(curve.slope) <= STEEPEST_SLOPE)) return undefined;
  const [darkLevel, brightLevel] = [Math.min(below.mean, above.mean), Math.max(below.mean, above.mean)];
  return {
    axis,
    line,
    offsetPixels: curve.offset,
    slope: curve.slope,
    bend: curve.bend,
    rising: above.mean > below.mean,
    darkLevel,
    brightLevel,
    folded: isFolded(darkLevel, brightLevel),
    residualPixels: curve.residual,
    plateauDeviation: Math.sqrt((below.variance + above.variance) / 2),
  };
}

/**
 * The edge fitted again, through the places where the interpolated lines pass half: straight interpolation between
 * pixels strays with the edge's place among them, which a tilted edge would show as a bend.
 */
function refined(image: EdgeImage, edge: Edge, options: EdgeOptions): Edge {
  const { sideLines = DEFAULT_SIDE_LINES } = options;
  const level = (edge.darkLevel + edge.brightLevel) / 2;
  const crossings = new Float64Array(2 * sideLines + 1);
  for (let t = -sideLines; t <= sideLines; t++) {
    const expected = edge.offsetPixels + edge.slope * t + edge.bend * t * t;
    const isBefore = (position: number): boolean =>
      interpolated(image, edge.axis, edge.line + t, position) < level === edge.rising;
    let [low, high] = [expected - 1, expected + 1];
    if (!isBefore(low) || isBefore(high)) return edge; // noise as large as the edge: the first fit is as good
    for (let halving = 0; halving < 12; halving++) {
      const middle = (low + high) / 2;
      if (isBefore(middle)) low = middle;
      else high = middle;
    }
    crossings[t + sideLines] = (low + high) / 2;
  }
  const { offset, slope, bend, residual } = fitParabola(crossings);
  return { ...edge, offsetPixels: offset, slope, bend, residualPixels: residual };
}

/** Ringing reaches 9 % of the jump below the dark level. */
function isFolded(darkLevel: number, brightLevel: number): boolean {
  return darkLevel < 0.1 * (brightLevel - darkLevel);
}

function merit({ brightLevel, darkLevel, residualPixels, plateauDeviation, folded }: Edge): number {
  return ((brightLevel - darkLevel) * (1 - residualPixels) - 2 * plateauDeviation) * (folded ? 0.5 : 1);
}

/** Mean and variance of the values between two positions (both held) on the lines around one. */
function sideStatistics(
  { data, lineStep, step }: Lines,
  line: number,
  sideLines: number,
  from: number,
  to: number,
): { mean: number; variance: number } {
  let count = 0;
  let mean = 0;
  let squares = 0;
  for (let t = line - sideLines; t <= line + sideLines; t++) {
    for (let x = from; x <= to; x++) {
      const value = data[t * lineStep + x * step]!;
      count++;
      const change = value - mean;
      mean += change / count;
      squares += change * (value - mean);
    }
  }
  return { mean, variance: squares / count };
}

/** Where a line passes a level, nearest to a position, by straight interpolation; NaN if it does not within reach. */
function crossing(
  { data, lineStep, step }: Lines,
  line: number,
  position: number,
  reach: number,
  level: number,
): number {
  const start = line * lineStep;
  let nearest = Number.NaN;
  for (let x = position - reach; x < position + reach; x++) {
    const here = data[start + x * step]! - level;
    const next = data[start + (x + 1) * step]! - level;
    if (here > 0 === next > 0) continue;
    const at = x + here / (here - next);
    if (!(Math.abs(at - position) >= Math.abs(nearest - position))) nearest = at;
  }
  return nearest;
}

/** Least squares `offset + slope t + bend t^2` through values at t = -n .. n, and the rms of what is left. */
function fitParabola(values: Float64Array): {
  offset: number;
  slope: number;
  bend: number;
  residual: number;
} {
  const n = (values.length - 1) / 2;
  let [sum, sumT, sumTT, momentTwo, momentFour] = [0, 0, 0, 0, 0];
  for (let t = -n; t <= n; t++) {
    const value = values[t + n]!;
    sum += value;
    sumT += value * t;
    sumTT += value * t * t;
    momentTwo += t * t;
    momentFour += t ** 4;
  }
  const count = values.length;
  const slope = n > 0 ? sumT / momentTwo : 0;
  const bend = n > 0 ? (count * sumTT - momentTwo * sum) / (count * momentFour - momentTwo ** 2) : 0;
  const offset = (sum - bend * momentTwo) / count;
  let squares = 0;
  for (let t = -n; t <= n; t++) squares += (values[t + n]! - offset - slope * t - bend * t * t) ** 2;
  return { offset, slope, bend, residual: Math.sqrt(squares / count) };
}

/** The image's magnitude at any position along a line, interpolated before the magnitude is taken where that can be. */
function interpolated(image: EdgeImage, axis: "x" | "y", line: number, position: number): number {
  const { count, length, lineStep, step } = alongAxis(image, axis);
  const weights = fourierWeights(length, position);
  const first = line * lineStep;
  if (image.channels === undefined) return weightedSum(image.data, weights, first, step);
  const { channels } = image;
  let squares = 0;
  for (let channel = 0; channel < channels.length; channel += 2 * count * length) {
    let re = 0;
    let im = 0;
    for (let i = 0, at = channel + 2 * first; i < length; i++, at += 2 * step) {
      const weight = weights[i]!;
      re += weight * channels[at]!;
      im += weight * channels[at + 1]!;
    }
    squares += re * re + im * im;
  }
  return Math.sqrt(squares);
}

function weightedSum(data: ArrayLike<number>, weights: Float64Array, first: number, step: number): number {
  let sum = 0;
  for (let i = 0, at = first; i < weights.length; i++, at += step) sum += weights[i]! * data[at]!;
  return sum;
}

/** Weights of Fourier interpolation at a position: Dirichlet's kernel, the unpaired frequency of even N split in two. */
function fourierWeights(length: number, position: number): Float64Array {
  const weights = new Float64Array(length);
  const nearest = Math.round(position);
  const fraction = position - nearest;
  const scale = Math.sin(Math.PI * fraction) / length;
  for (let i = 0; i < length; i++) {
    const angle = (Math.PI * (position - i)) / length;
    const shape = length % 2 === 0 ? Math.tan(angle) : Math.sin(angle);
    weights[i] = ((nearest - i) % 2 === 0 ? scale : -scale) / shape;
  }
  if (fraction === 0) weights[nearest] = 1; // 0/0 above
  return weights;
}

/** Mean between two indices under a Hann bell, which cancels ripples of the ringing better than a plain mean. */
function plateau(values: Float64Array, from: number, to: number): number {
  let sum = 0;
  let total = 0;
  for (let i = from; i <= to; i++) {
    const weight = Math.sin((Math.PI * (i - from + 0.5)) / (to - from + 1)) ** 2;
    sum += weight * values[i]!;
    total += weight;
  }
  return sum / total;
}

/** Pixels of the bell that the ringing is smoothed away with: two periods of it, where a Hann bell passes nothing. */
const BELL_PIXELS = 4;

/**
 * Slope per sample of the bright side, from bell means that begin two pixels behind the edge: the line through them.
 * @param bright from the edge on, SLOPE_SAMPLES to a pixel
 */
function plateauSlope(bright: Float64Array): number {
  const half = (BELL_PIXELS / 2) * SLOPE_SAMPLES;
  const [from, to] = [2 * half, bright.length - 1 - half];
  const centre = (from + to) / 2;
  let product = 0;
  let square = 0;
  for (let i = from; i <= to; i++) {
    product += (i - centre) * plateau(bright, i - half, i + half);
    square += (i - centre) ** 2;
  }
  return square > 0 ? product / square : 0;
}

/** Steps from the top to where the spread has fallen to half of it, by straight interpolation; Infinity if never. */
function halfWidthSteps(spread: Float64Array, top: number, direction: 1 | -1): number {
  const half = spread[top]! / 2;
  for (let i = top; i + direction >= 0 && i + direction < spread.length; i += direction) {
    const here = spread[i]!;
    const next = spread[i + direction]!;
    if (next < half) return Math.abs(i - top) + (here - half) / (here - next);
  }
  return Number.POSITIVE_INFINITY;
}

/** Where the profile passes one half, nearest to its middle, in steps. */
function halfLevelStep(values: Float64Array): number {
  const middle = (values.length - 1) / 2;
  for (let away = 0; away < middle; away++) {
    for (const i of [middle + away, middle - away - 1]) {
      const [here, next] = [values[i]!, values[i + 1]!];
      if (here < 0.5 && next >= 0.5) return i + (0.5 - here) / (next - here);
    }
  }
  return Number.NaN;
}
