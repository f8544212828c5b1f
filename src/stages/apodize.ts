import { UsageError } from "../errors.js";
import {
  formatWindow,
  noiseFactor,
  parseWindow,
  type WindowAxis,
  WindowError,
  type WindowShape,
  type WindowSpec,
  windowGrid,
} from "../kernels/window.js";
import { SPATIAL_AXES, type SpatialAxis } from "../physics/layout.js";
import { toKSpace } from "./domain.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type Frame, type FrameStage, type Layout } from "./stage.js";

interface Params {
  readonly window: WindowSpec;
  readonly shape: WindowShape;
  readonly axes: readonly SpatialAxis[];
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    window: {
      description: "name with its parameters after colons (tukey:0.5), or a map { name, ...parameters }",
      type: ["string", "object"],
      default: "hann",
    },
    shape: { enum: ["separable", "radial"], default: "separable" },
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
    try {
      return { ...rest, window: parseWindow(window) };
    } catch (error) {
      if (!(error instanceof WindowError)) throw error;
      throw new UsageError({ field: "apodize.window", value: error.value }, error.rule, error.mend);
    }
  },
  plan(layout, params) {
    const axes = usedAxes(layout, params);
    return {
      layout: isNothing(params)
        ? layout
        : { ...layout, inImage: layout.inImage.filter((a) => !axes.includes(a)) },
      physics: {
        window: formatWindow(params.window),
        axes: axes.join(", "),
        "noise factor": Number(
          noiseFactor(windowGrid(params.window, params.shape, windowAxes(layout, axes))).toPrecision(6),
        ),
      },
    };
  },
  run(frame, params, context) {
    if (isNothing(params)) return frame;
    const axes = usedAxes(frame.layout, params);
    const ready = toKSpace(frame, axes, context);
    const grid = gridFor(ready.layout, axes, params);
    context.kernels.multiplyGrid(ready.data, ready.data, grid);
    return { ...ready, noise: { ...ready.noise, gain: ready.noise.gain * sampledNoiseFactor(ready, grid) } };
  },
};

/** Whether every gain is 1; a radial window is 0 outside its disc, whatever its name. */
function isNothing({ window, shape }: Params): boolean {
  return window.name === "none" && shape === "separable";
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
  }));
}

/** The grid that these parameters gave last, with the layout that it is for: the groups of a scan share one. */
const lastGrids = new WeakMap<Params, { layout: Layout; grid: Float32Array }>();

function gridFor(layout: Layout, axes: readonly SpatialAxis[], params: Params): Float32Array {
  const last = lastGrids.get(params);
  if (last && sameGrid(last.layout, layout)) return last.grid;
  const grid = Float32Array.from(fullGrid(layout, axes, params));
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
function fullGrid(layout: Layout, axes: readonly SpatialAxis[], params: Params): Float64Array {
  const covered = windowGrid(params.window, params.shape, windowAxes(layout, axes));
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
