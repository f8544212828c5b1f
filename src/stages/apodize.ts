import { UsageError } from "../errors.js";
import {
  formatWindow,
  noiseFactor,
  parseWindow,
  type WindowAxis,
  WindowError,
  type WindowShape,
  type WindowSpec,
  windowEdgeSamples,
  windowGrid,
} from "../kernels/window.js";
import { SPATIAL_AXES, type SpatialAxis } from "../physics/layout.js";
import { toKSpace } from "./domain.js";
import { parseBySchema } from "./parameters.js";
import {
  axisLength,
  type Frame,
  type FrameStage,
  type InputArray,
  type InputArrays,
  type Layout,
} from "./stage.js";

interface Params {
  /** A window by name, or the file of a user's own. */
  readonly window: WindowSpec | string;
  readonly shape: WindowShape;
  readonly axes: readonly SpatialAxis[];
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    window: {
      description:
        "name with its parameters after colons (tukey:0.5), a map { name, ...parameters }, or a .npy of gains, 1 at k = 0",
      type: ["string", "object"],
      default: "hann",
    },
    shape: {
      description: "radial: one circle in k; elliptical: each axis to its own edge",
      enum: ["separable", "radial", "elliptical"],
      default: "separable",
    },
    axes: {
      description: "axes that the window covers; those of length 1 are left alone",
      type: "array",
      items: { enum: ["x", "y", "z"] },
      uniqueItems: true,
      minItems: 1,
      default: ["x", "y", "z"],
    },
  },
};

/**
 * Multiply k-space by a window: w(u), u = k/h counted from k = 0, so that the weight at k = 0 is exactly 1. The window
 * reaches over the acquired samples (after trimming); with partial coverage h is the larger side.
 * A window of one's own is an array of gains: as long as each windowed axis, or of the windowed axes' shape ([z, y, x]).
 * Source: Harris 1978, Proc IEEE 66:51; windows and formulas in kernels/window.ts.
 */
export const apodize: FrameStage<Params> = {
  id: "apodize",
  kind: "k-space",
  summary: "a window over k-space: less ringing and noise, less resolution",
  schema,
  parse(raw) {
    const { window, ...rest } = parseBySchema<Omit<Params, "window"> & { window: unknown }>(
      "apodize",
      schema,
      raw,
    );
    if (isFile(window)) return { ...rest, window };
    try {
      return { ...rest, window: parseWindow(window) };
    } catch (error) {
      if (!(error instanceof WindowError)) throw error;
      throw new UsageError({ field: "apodize.window", value: error.value }, error.rule, error.mend);
    }
  },
  files: ({ window }) => (isFile(window) ? [window] : []),
  plan(layout, params, _scan, { arrays }) {
    const axes = usedAxes(layout, params);
    const gains = axesGrid(layout, axes, params, arrays);
    return {
      layout: isNothing(params)
        ? layout
        : { ...layout, inImage: layout.inImage.filter((a) => !axes.includes(a)) },
      physics: {
        window: isFile(params.window) ? params.window : formatWindow(params.window),
        axes: axes.join(", "),
        "noise factor": Number(noiseFactor(gains).toPrecision(6)),
      },
    };
  },
  run(frame, params, context) {
    if (isNothing(params)) return frame;
    const axes = usedAxes(frame.layout, params);
    const ready = toKSpace(frame, axes, context);
    const grid = gridFor(ready.layout, axes, params, context.arrays);
    context.kernels.multiplyGrid(ready.data, ready.data, grid);
    return { ...ready, noise: { ...ready.noise, gain: ready.noise.gain * sampledNoiseFactor(ready, grid) } };
  },
};

function isFile(window: unknown): window is string {
  return typeof window === "string" && window.endsWith(".npy");
}

/** Whether every gain is 1; a round window is 0 outside its disc, whatever its name. */
function isNothing({ window, shape }: Params): boolean {
  return typeof window !== "string" && window.name === "none" && shape === "separable";
}

function usedAxes(layout: Layout, params: Params): SpatialAxis[] {
  return (["z", "y", "x"] as const).filter(
    (axis) => params.axes.includes(axis) && axisLength(layout, axis) > 1,
  );
}

function windowAxes(layout: Layout, axes: readonly SpatialAxis[]): WindowAxis[] {
  return axes.map((axis) => ({
    length: axisLength(layout, axis),
    firstSample: layout.acquired[axis].first,
    lastSample: layout.acquired[axis].last,
    edgePerMm: edgePerMm(layout, axis),
  }));
}

/** The larger acquired side of an axis, cycles per mm. */
function edgePerMm(layout: Layout, axis: SpatialAxis): number {
  const { first, last } = layout.acquired[axis];
  const samples = windowEdgeSamples({
    length: axisLength(layout, axis),
    firstSample: first,
    lastSample: last,
  });
  return samples / layout.fovMm[axis];
}

/** Gains over the windowed axes, in the order z, y, x. */
function axesGrid(
  layout: Layout,
  axes: readonly SpatialAxis[],
  { window, shape }: Params,
  arrays: InputArrays,
): Float64Array {
  if (typeof window !== "string") return windowGrid(window, shape, windowAxes(layout, axes));
  return ownGrid(
    arrays.get(window)!,
    axes.map((axis) => axisLength(layout, axis)),
  );
}

/** A user's own gains on the grid of the windowed axes. @throws UsageError where they do not fit, or not 1 at k = 0 */
function ownGrid({ file, shape, data }: InputArray, lengths: readonly number[]): Float64Array {
  const isGrid = shape.length === lengths.length && shape.every((length, i) => length === lengths[i]);
  const isLine = shape.length === 1 && lengths.every((length) => length === shape[0]);
  if (!isGrid && !isLine)
    throw new UsageError(
      { file, field: "shape", value: shape.join(" x ") },
      `must be that of the windowed axes, ${lengths.join(" x ")}`,
      "Name fewer axes (apodize.axes), or save one gain for each sample",
    );
  const grid = lengths.length > 1 && isLine ? productGrid(data, lengths.length) : Float64Array.from(data);
  const centre = lengths.reduce((index, length) => index * length + Math.floor(length / 2), 0);
  if (Math.abs(grid[centre]! - 1) > 1e-6)
    throw new UsageError(
      { file, field: "gain at k = 0, index floor(N/2)", value: grid[centre]! },
      "must be 1, so that the level stays",
      "Divide the window by it",
    );
  return grid;
}

/** One line of gains along each of some axes. */
function productGrid(line: ArrayLike<number>, axes: number): Float64Array {
  let grid = Float64Array.of(1);
  for (let axis = 0; axis < axes; axis++)
    grid = Float64Array.from(
      { length: grid.length * line.length },
      (_, i) => grid[Math.floor(i / line.length)]! * line[i % line.length]!,
    );
  return grid;
}

/** The gains along one axis, k = 0 of the others. @param params what `apodize.parse` gave */
export function lineGains(
  layout: Layout,
  params: unknown,
  axis: SpatialAxis,
  arrays: InputArrays,
): Float64Array {
  const own = params as Params; // as the caller promises
  const length = axisLength(layout, axis);
  const axes = usedAxes(layout, own);
  if (!axes.includes(axis)) return new Float64Array(length).fill(1);
  const grid = axesGrid(layout, axes, own, arrays);
  const strides = new Map<SpatialAxis, number>();
  let step = 1;
  for (const each of [...axes].reverse()) {
    strides.set(each, step);
    step *= axisLength(layout, each);
  }
  let start = 0;
  for (const each of axes)
    if (each !== axis) start += strides.get(each)! * Math.floor(axisLength(layout, each) / 2);
  return Float64Array.from({ length }, (_, i) => grid[start + i * strides.get(axis)!]!);
}

/** The grid that these parameters gave last, with the layout that it is for: the groups of a scan share one. */
const lastGrids = new WeakMap<Params, { layout: Layout; grid: Float32Array }>();

function gridFor(
  layout: Layout,
  axes: readonly SpatialAxis[],
  params: Params,
  arrays: InputArrays,
): Float32Array {
  const last = lastGrids.get(params);
  if (last && sameGrid(last.layout, layout)) return last.grid;
  const grid = Float32Array.from(fullGrid(layout, axes, axesGrid(layout, axes, params, arrays)));
  lastGrids.set(params, { layout, grid });
  return grid;
}

function sameGrid(a: Layout, b: Layout): boolean {
  return SPATIAL_AXES.every(
    (axis) =>
      axisLength(a, axis) === axisLength(b, axis) &&
      a.acquired[axis].first === b.acquired[axis].first &&
      a.acquired[axis].last === b.acquired[axis].last,
  );
}

/** The window over [z, y, x], 1 along the axes that it does not cover. */
function fullGrid(layout: Layout, axes: readonly SpatialAxis[], covered: Float64Array): Float64Array {
  const [z, y, x] = (["z", "y", "x"] as const).map((axis) => axisLength(layout, axis)) as [
    number,
    number,
    number,
  ];
  const stride = { z: 0, y: 0, x: 0 };
  let step = 1;
  for (const axis of [...axes].reverse()) {
    stride[axis] = step;
    step *= axisLength(layout, axis);
  }
  const grid = new Float64Array(z * y * x);
  for (let k = 0, at = 0; k < z; k++)
    for (let j = 0; j < y; j++)
      for (let i = 0; i < x; i++) grid[at++] = covered[k * stride.z + j * stride.y + i * stride.x]!;
  return grid;
}

/** Change of the noise's standard deviation: acquired samples count, each with the variance of its average. */
function sampledNoiseFactor(frame: Frame, grid: Float32Array): number {
  const { layout, sampling } = frame;
  const x = axisLength(layout, "x");
  const { first, last } = layout.acquired.x;
  let before = 0;
  let after = 0;
  for (let line = 0; line < grid.length / x; line++) {
    const count = sampling ? sampling.counts[line]! : 1;
    if (count === 0) continue;
    for (let i = first; i <= last; i++) {
      before += 1 / count;
      after += grid[line * x + i]! ** 2 / count;
    }
  }
  return before === 0 ? 1 : Math.sqrt(after / before);
}
