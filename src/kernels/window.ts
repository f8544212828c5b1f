import { besselI0, sinc } from "./special-functions.js";

type ParameterName = "alpha" | "sigma" | "fwhm" | "beta" | "radius" | "width";

type ParameterValues = { readonly [parameter in ParameterName]?: number };

/** A window by its name and its parameters, defaults filled in; what `parseWindow` gives and takes. */
export type WindowSpec = { readonly name: WindowName } & ParameterValues;

export interface WindowParameter {
  readonly name: ParameterName;
  /** Absent for a parameter that is given in place of another one. */
  readonly default?: number;
  readonly insteadOf?: ParameterName;
  readonly minimum: number;
  readonly maximum: number;
  readonly unit: string;
  readonly help: string;
}

export interface WindowDefinition {
  readonly name: string;
  readonly parameters: readonly WindowParameter[];
  /** The formula as help and reports print it; u = k/h. */
  readonly formula: string;
  readonly source: string;
  /**
   * Gain at 0 <= u <= 1, exactly 1 at u = 0.
   * @param edgeCyclesPerPixel spatial frequency at u = 1: h/N, 1/2 for even N
   */
  readonly gain: (u: number, parameters: ParameterValues, edgeCyclesPerPixel: number) => number;
}

const HARRIS = "Harris 1978, Proc. IEEE 66:51, doi:10.1109/PROC.1978.10837";

/** Every window, in the order that help and tables show. */
export const WINDOWS = [
  {
    name: "none",
    parameters: [],
    formula: "1",
    source: HARRIS,
    gain: () => 1,
  },
  {
    name: "hann",
    parameters: [],
    formula: "0.5 + 0.5 cos(pi u)",
    source: HARRIS,
    gain: (u) => 0.5 + 0.5 * Math.cos(Math.PI * u),
  },
  {
    name: "hamming",
    parameters: [],
    formula: "0.54 + 0.46 cos(pi u)",
    source: HARRIS,
    gain: (u) => 0.54 + 0.46 * Math.cos(Math.PI * u),
  },
  {
    name: "blackman",
    parameters: [],
    formula: "0.42 + 0.5 cos(pi u) + 0.08 cos(2 pi u)",
    source: HARRIS,
    // The same sum, ordered so that rounding leaves exactly 1 at u = 0 and nothing negative at u = 1.
    gain: (u) => 0.5 + 0.5 * Math.cos(Math.PI * u) - 0.08 * (1 - Math.cos(2 * Math.PI * u)),
  },
  {
    name: "welch",
    parameters: [],
    formula: "1 - u^2",
    source: `${HARRIS} (there called Riesz)`,
    gain: (u) => 1 - u * u,
  },
  {
    name: "lanczos",
    parameters: [],
    formula: "sin(pi u) / (pi u)",
    source: `${HARRIS} (there called Riemann)`,
    gain: (u) => (u === 1 ? 0 : sinc(u)),
  },
  {
    name: "tukey",
    parameters: [
      {
        name: "alpha",
        default: 0.5,
        minimum: 0,
        maximum: 1,
        unit: "fraction of h",
        help: "width of each tapered side: 0 is no window, 1 is Hann",
      },
    ],
    formula: "1 for |u| <= 1 - alpha, else 0.5 + 0.5 cos(pi (|u| - 1 + alpha) / alpha)",
    source: HARRIS,
    gain: (u, { alpha }) =>
      u <= 1 - alpha! ? 1 : 0.5 + 0.5 * Math.cos((Math.PI * (u - 1 + alpha!)) / alpha!),
  },
  {
    name: "gaussian",
    parameters: [
      {
        name: "sigma",
        default: 0.4,
        minimum: 0.05,
        maximum: 10,
        unit: "fraction of h",
        help: "standard deviation of the window itself; 1/sigma is the alpha of Harris",
      },
      {
        name: "fwhm",
        insteadOf: "sigma",
        minimum: 0.01,
        maximum: 20,
        unit: "image pixels",
        help: "full width at half maximum of the Gaussian that the image is convolved with",
      },
    ],
    formula: "exp(-0.5 (u/sigma)^2), or exp(-(pi fwhm k/N)^2 / (4 ln 2))",
    source: HARRIS,
    gain: (u, { sigma, fwhm }, edgeCyclesPerPixel) =>
      fwhm === undefined
        ? Math.exp(-0.5 * (u / sigma!) ** 2)
        : Math.exp(-((Math.PI * fwhm * u * edgeCyclesPerPixel) ** 2) / (4 * Math.LN2)),
  },
  {
    name: "kaiser",
    parameters: [
      {
        name: "beta",
        default: 6,
        minimum: 0,
        maximum: 50,
        unit: "dimensionless",
        help: "more is smoother: 0 is no window; beta is pi times the alpha of Harris",
      },
    ],
    formula: "I0(beta sqrt(1 - u^2)) / I0(beta)",
    source: HARRIS,
    gain: (u, { beta }) => besselI0(beta! * Math.sqrt(1 - u * u)) / besselI0(beta!),
  },
  {
    name: "fermi",
    parameters: [
      {
        name: "radius",
        default: 1,
        minimum: 0.05,
        maximum: 2,
        unit: "fraction of h",
        help: "where the gain is one half",
      },
      {
        name: "width",
        default: 0.078125,
        minimum: 0.001,
        maximum: 1,
        unit: "fraction of h",
        help: "steepness: from 90 % to 10 % takes 4.394 widths",
      },
    ],
    formula: "(1 + exp(-radius/width)) / (1 + exp((|u| - radius)/width))",
    source: "Bernstein, Fain and Riederer 2001, J. Magn. Reson. Imaging 14:270; scaled to 1 at u = 0",
    gain: (u, { radius, width }) =>
      (1 + Math.exp(-radius! / width!)) / (1 + Math.exp((u - radius!) / width!)),
  },
] as const satisfies readonly WindowDefinition[];

export type WindowName = (typeof WINDOWS)[number]["name"];

/** Samples along one encoded axis. */
export interface WindowAxis {
  /** Encoded samples N; k = 0 at floor(N/2). */
  readonly length: number;
  /** Index of the first and last acquired sample, where not all of 0 .. N-1 were (partial Fourier, asymmetric echo). */
  readonly firstSample?: number | undefined;
  readonly lastSample?: number | undefined;
  /** Spatial frequency at u = 1, cycles per mm; left out where all axes reach as far. */
  readonly edgePerMm?: number | undefined;
}

/** The definition behind a name or a spec. */
export function windowDefinition(name: WindowName): WindowDefinition {
  return WINDOWS.find((window) => window.name === name)!;
}

/**
 * Samples from k = 0 to where u = 1: the larger acquired side. N/2 for even and (N-1)/2 for odd N, all acquired.
 * At least 1, so that a single sample at k = 0 has u = 0.
 */
export function windowEdgeSamples(axis: WindowAxis): number {
  const centre = Math.floor(axis.length / 2);
  const first = axis.firstSample ?? 0;
  const last = axis.lastSample ?? axis.length - 1;
  return Math.max(centre - first, last - centre, 1);
}

/**
 * Gain of a window at u = k/h.
 * @param u                  dimensionless; beyond |u| = 1 the edge value is held
 * @param edgeCyclesPerPixel spatial frequency at u = 1: h/N; 1/2 (the default) for even N and in the continuous limit
 */
export function windowGain(spec: WindowSpec, u: number, edgeCyclesPerPixel = 0.5): number {
  return windowDefinition(spec.name).gain(Math.min(Math.abs(u), 1), spec, edgeCyclesPerPixel);
}

/**
 * Gains along one axis, [length], k = 0 at floor(N/2), where the gain is exactly 1.
 * u = k/h with h the larger acquired side; a sample beyond h on the other side (never acquired, perhaps filled later)
 * takes the edge value.
 */
export function windowValues(
  spec: WindowSpec,
  length: number,
  acquired: Omit<WindowAxis, "length"> = {},
): Float64Array {
  const { gain } = windowDefinition(spec.name);
  const centre = Math.floor(length / 2);
  const edge = windowEdgeSamples({ length, ...acquired });
  const out = new Float64Array(length);
  for (let i = 0; i < length; i++) {
    out[i] = gain(Math.min(Math.abs(i - centre) / edge, 1), spec, edge / length);
  }
  return out;
}

/** How an axis's gains make a grid: their product, or the window of the distance from k = 0. */
export type WindowShape = "separable" | "radial" | "elliptical";

/**
 * Gains on a grid, C order, [axes[0].length, axes[1].length, ...], k = 0 at floor(N/2) of each axis.
 *
 * Separable: the product of the axes' gains. Elliptical: the window at r = sqrt(sum u^2), each u by its own axis's h,
 * and 0 beyond r = 1 for every window, "none" included. Radial: the same with one h for all axes, in cycles per length
 * (`edgePerMm`), that of the axis that reaches least: a circle in k, so that resolution is the same in every direction.
 */
export function windowGrid(spec: WindowSpec, shape: WindowShape, axes: readonly WindowAxis[]): Float64Array {
  return shape === "separable" ? separableGrid(spec, axes) : roundGrid(spec, axes, shape === "radial");
}

function separableGrid(spec: WindowSpec, axes: readonly WindowAxis[]): Float64Array {
  let grid = Float64Array.of(1);
  for (const axis of axes) {
    const along = windowValues(spec, axis.length, axis);
    const next = new Float64Array(grid.length * along.length);
    for (let i = 0, at = 0; i < grid.length; i++) {
      for (let j = 0; j < along.length; j++) next[at++] = grid[i]! * along[j]!;
    }
    grid = next;
  }
  return grid;
}

function roundGrid(spec: WindowSpec, axes: readonly WindowAxis[], isCircle: boolean): Float64Array {
  const least = Math.min(...axes.map(({ edgePerMm = 1 }) => edgePerMm));
  let squares = Float64Array.of(0); // u^2 summed over the axes so far
  for (const axis of axes) {
    const centre = Math.floor(axis.length / 2);
    const edge = windowEdgeSamples(axis) * (isCircle ? least / (axis.edgePerMm ?? 1) : 1);
    const next = new Float64Array(squares.length * axis.length);
    for (let i = 0, at = 0; i < squares.length; i++) {
      for (let j = 0; j < axis.length; j++) next[at++] = squares[i]! + ((j - centre) / edge) ** 2;
    }
    squares = next;
  }
  const { gain } = windowDefinition(spec.name);
  // A width in pixels needs one edge frequency; pixels that differ between the axes take the last one's.
  const last = axes[axes.length - 1]!;
  const edgeCyclesPerPixel = windowEdgeSamples(last) / last.length;
  return squares.map((square) => (square > 1 ? 0 : gain(Math.sqrt(square), spec, edgeCyclesPerPixel)));
}

/**
 * Factor on the standard deviation of white noise: sqrt(mean of w^2), the transform being unitary.
 * @param gains the window at every acquired sample, any number of axes
 * Source: Kellman and McVeigh 2005, Magn. Reson. Med. 54:1439, doi:10.1002/mrm.20713.
 */
export function noiseFactor(gains: Float64Array): number {
  let sum = 0;
  for (const gain of gains) sum += gain * gain;
  return Math.sqrt(sum / gains.length);
}

/** A window asked for wrongly: what, the rule, and how to mend it. */
export class WindowError extends Error {
  override readonly name = "WindowError";
  readonly value: unknown;
  readonly rule: string;
  readonly mend: string;

  constructor(value: unknown, rule: string, mend: string) {
    super(`window ${JSON.stringify(value) ?? String(value)}: ${rule}. ${mend}`);
    this.value = value;
    this.rule = rule;
    this.mend = mend;
  }
}

/**
 * A window from text (`hann`, `tukey:0.5`, `fermi:0.9:0.05`, `gaussian:fwhm=2`; colons, so that a comma can separate
 * windows) or from an object `{ name, ...parameters }`. Defaults are filled in; the result parses to itself.
 * @throws WindowError unknown name or parameter, a value that is no number or out of range, two alternatives at once
 */
export function parseWindow(raw: unknown): WindowSpec {
  const given = typeof raw === "string" ? textFields(raw) : raw;
  if (typeof given !== "object" || given === null || Array.isArray(given)) {
    throw new WindowError(
      raw,
      "must be text or an object with a name",
      'Write for example "hann" or "tukey:0.5".',
    );
  }
  const { name, ...values } = given as Record<string, unknown>; // an object, as checked above
  const definition: WindowDefinition | undefined = WINDOWS.find((window) => window.name === name);
  if (!definition) {
    const names = WINDOWS.map((window) => window.name).join(", ");
    throw new WindowError(raw, `${JSON.stringify(name)} is not a window`, `Choose one of ${names}.`);
  }
  return { name: definition.name as WindowName, ...parameterValues(raw, definition, values) };
}

/** The text that `parseWindow` turns into this spec: `tukey:alpha=0.5`. */
export function formatWindow(spec: WindowSpec): string {
  const { name, ...values } = spec;
  return [name, ...Object.entries(values).map(([key, value]) => `${key}=${value}`)].join(":");
}

/** `tukey:0.5` or `fermi:radius=0.9:width=0.05` as an object; a bare value takes the parameter at its place. */
function textFields(text: string): Record<string, unknown> {
  const [name, ...parts] = text.trim().split(":");
  const definition: WindowDefinition | undefined = WINDOWS.find((window) => window.name === name);
  const fields: Record<string, unknown> = { name };
  for (const [place, part] of parts.entries()) {
    const equals = part.indexOf("=");
    const key = equals < 0 ? definition?.parameters[place]?.name : part.slice(0, equals).trim();
    if (definition && (key === undefined || key in fields)) {
      throw new WindowError(text, `${JSON.stringify(part)} is one value too many`, parameterHelp(definition));
    }
    const value = part.slice(equals + 1).trim();
    if (key !== undefined) fields[key] = value === "" ? value : Number(value);
  }
  return fields;
}

function parameterValues(
  raw: unknown,
  definition: WindowDefinition,
  values: Readonly<Record<string, unknown>>,
): ParameterValues {
  const out: { [parameter in ParameterName]?: number } = {};
  for (const [key, value] of Object.entries(values)) {
    const parameter = definition.parameters.find(({ name }) => name === key);
    if (!parameter) throw new WindowError(raw, `${key} is not a parameter of it`, parameterHelp(definition));
    const { name, minimum, maximum, insteadOf } = parameter;
    if (typeof value !== "number" || !(value >= minimum && value <= maximum)) {
      throw new WindowError(
        raw,
        `${name} must be a number from ${minimum} to ${maximum}`,
        parameterHelp(definition),
      );
    }
    if (insteadOf !== undefined && insteadOf in values) {
      throw new WindowError(raw, `${name} stands in place of ${insteadOf}`, "Give one of the two.");
    }
    out[name] = value;
  }
  for (const { name, default: preset } of definition.parameters) {
    const replaced = definition.parameters.some((other) => other.insteadOf === name && other.name in out);
    if (preset !== undefined && !replaced) out[name] ??= preset;
  }
  return out;
}

function parameterHelp({ name, parameters }: WindowDefinition): string {
  if (parameters.length === 0) return `${name} takes no parameters.`;
  const parts = parameters.map((one) => `${one.name} (${one.unit}, ${one.minimum} to ${one.maximum})`);
  return `${name} takes ${parts.join(", ")}.`;
}
