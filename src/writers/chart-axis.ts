import { scaleLinear, scaleLog } from "d3-scale";

export interface Axis {
  readonly label: string;
  /** Shown in round brackets after the label. */
  readonly unit?: string;
  /** Default linear. */
  readonly scale?: "linear" | "log";
  /** First and last value; default from the data. */
  readonly domain?: readonly [number, number];
}

export interface Tick {
  readonly value: number;
  /** Empty for the small ticks between labelled ones. */
  readonly label: string;
}

/** An axis laid out along a line of the picture. */
export interface PlacedAxis {
  readonly domain: readonly [number, number];
  /** Points along the picture; NaN for what the axis cannot show (no number, or not above 0 on a logarithmic one). */
  place(value: number): number;
}

/** Smaller numbers are shown as 0: nearer to it, doubles lose their digits. */
const LEAST = 1e-290;

/** Label and unit as they stand beside the axis. */
export function axisTitle(axis: Pick<Axis, "label" | "unit">): string {
  return axis.unit ? `${axis.label} (${axis.unit})` : axis.label;
}

/**
 * The values that an axis spans: as given, else those of the data. `isTight` keeps the ends of the data (positions);
 * otherwise they are widened to round numbers, and to 0 where the data come near it from above.
 */
export function axisDomain(axis: Axis, values: Iterable<number>, isTight: boolean): [number, number] {
  if (axis.domain) return [axis.domain[0], axis.domain[1]];
  const isLog = axis.scale === "log";
  let low = Infinity;
  let high = -Infinity;
  for (const value of values) {
    if (!Number.isFinite(value) || (isLog && value < LEAST)) continue;
    low = Math.min(low, value);
    high = Math.max(high, value);
  }
  if (low > high) return isLog ? [1, 10] : [0, 1];
  const size = Math.max(Math.abs(low), Math.abs(high));
  const isNarrow = high - low <= 1e-9 * size; // doubles leave no room for ticks
  if (isLog) {
    if (isNarrow) return [low / 2, high * 2];
    return isTight ? [low, high] : (scaleLog([low, high], [0, 1]).nice().domain() as [number, number]);
  }
  if (size < LEAST) return [-1, 1];
  if (isNarrow) return [low - size / 2, high + size / 2];
  if (isTight) return [low, high];
  const from = low > 0 && low < high / 2 ? 0 : low;
  return scaleLinear([from, high], [0, 1]).nice(5).domain() as [number, number]; // two ends in, two ends out
}

/** Place an axis from `startPt` to `endPt`. */
export function placeAxis(
  axis: Axis,
  domain: readonly [number, number],
  startPt: number,
  endPt: number,
): PlacedAxis {
  const isLog = axis.scale === "log";
  const scale = isLog ? scaleLog(domain, [startPt, endPt]) : scaleLinear(domain, [startPt, endPt]);
  return {
    domain,
    place: (value) => (Number.isFinite(value) && (!isLog || value > 0) ? scale(value) : Number.NaN),
  };
}

/**
 * Ticks whose labels do not touch: as many as fit, at most `most` on a linear axis.
 * @param fits whether these labelled ticks have room
 */
export function ticksThatFit(
  scale: "linear" | "log",
  domain: readonly [number, number],
  most: number,
  fits: (ticks: readonly Tick[]) => boolean,
): Tick[] {
  const [low, high] = [Math.min(...domain), Math.max(...domain)];
  if (scale === "log" && high / low >= 10) return logTicks(low, high, fits);
  for (let count = most; count > 1; count--) {
    const ticks = linearTicks(low, high, count);
    if (fits(ticks)) return ticks;
  }
  return linearTicks(low, high, 1);
}

function linearTicks(low: number, high: number, count: number): Tick[] {
  const values = scaleLinear([low, high], [0, 1]).ticks(count);
  const step = (values[1] ?? 0) - (values[0] ?? 0);
  return values.map((value) => ({ value, label: tickLabel(value, step) }));
}

/** Powers of ten, with 2 and 5 labelled between them where there is room; else every second, third ... power. */
function logTicks(low: number, high: number, fits: (ticks: readonly Tick[]) => boolean): Tick[] {
  const slack = 1e-9; // of the logarithm: 10 ** 3 must count as inside a domain that ends at 1000
  const from = Math.floor(Math.log10(low) + slack);
  const to = Math.ceil(Math.log10(high) - slack);
  const all: { value: number; power: number; factor: number }[] = [];
  for (let power = from; power <= to; power++) {
    for (let factor = 1; factor < 10; factor++) {
      const value = Number(`${factor}e${power}`); // exact, as 10 ** -3 is not
      if (value >= low * (1 - slack) && value <= high * (1 + slack)) all.push({ value, power, factor });
    }
  }
  const choose = (isLabelled: (power: number, factor: number) => boolean): Tick[] =>
    all.map(({ value, power, factor }) => ({
      value,
      label: isLabelled(power, factor) ? tickLabel(value, value) : "",
    }));
  const dense = choose((_, factor) => factor === 1 || factor === 2 || factor === 5);
  if (to - from <= 2 && fits(dense)) return dense;
  for (let every = 1; every <= to - from; every++) {
    const ticks = choose((power, factor) => factor === 1 && power % every === 0);
    if (fits(ticks)) return ticks.filter((tick) => tick.label !== "" || every === 1);
  }
  return choose((power, factor) => factor === 1 && power === to);
}

/** A tick's number with as many decimals as the step needs, and a true minus sign. */
export function tickLabel(value: number, step: number): string {
  const size = Math.max(Math.abs(value), Math.abs(step));
  const decimals = Math.max(0, -Math.floor(Math.log10(Math.abs(step) || 1) + 1e-9));
  const isPlain = value === 0 || (size < 1e5 && decimals <= 4);
  const text = isPlain
    ? value.toFixed(value === 0 && decimals > 4 ? 0 : decimals)
    : String(Number(value.toPrecision(6)).toExponential());
  return text.replace("e+", "e").replaceAll("-", "\u2212");
}
