import { UsageError } from "../errors.js";
import type { WindowFigures } from "../kernels/point-spread.js";
import type { WindowAxis, WindowShape, WindowSpec } from "../kernels/window.js";
import { type Command, type Flags, READ_OPTIONS } from "./command.js";
import { scanOfFlags } from "./read-scan.js";
import { finiteFigures, type Measured, type Ruler, taperTable } from "./taper-table.js";
import type { Terminal } from "./terminal.js";
import { wrap } from "./text.js";

/** `carillon taper`: what windows over k-space do to resolution, ringing and noise, by theory. */
export const taper: Command = {
  name: "taper",
  usage: "[WINDOWS] [flags]",
  summary: "what windows do to resolution, ringing and noise, by theory",
  arguments: [
    {
      name: "windows",
      describe: "names with parameters, commas between: hann,tukey:0.5; or a .npy",
      required: false,
    },
  ],
  options: {
    length: {
      type: "whole",
      least: 2,
      value: "N",
      describe: "samples of the axis",
      byDefault: "the limit of many",
    },
    "fov-mm": { type: "number", value: "MM", describe: "field of view of those samples, for widths in mm" },
    raw: {
      type: "text",
      value: "RAW",
      describe: "raw file whose axis it is: samples, field of view, what was acquired",
    },
    axis: {
      type: "text",
      value: "AXIS",
      choices: ["x", "y", "z"],
      fallback: "x",
      describe: "axis of the raw file",
    },
    shape: {
      type: "text",
      value: "SHAPE",
      choices: ["separable", "radial"],
      fallback: "separable",
      describe: "radial: of the distance from k = 0, computed in 2-D",
    },
    list: { type: "switch", describe: "print all windows with formula and source" },
    csv: { type: "text", value: "FILE", describe: "write the figures as CSV" },
    svg: { type: "text", value: "FILE", describe: "draw windows and point spreads as SVG" },
    png: { type: "text", value: "FILE", describe: "draw them as PNG" },
    force: { type: "switch", describe: "replace files that exist" },
    ...READ_OPTIONS,
  },
  examples: [
    ["taper hann,tukey:0.5,none", "in the limit of many samples"],
    ["taper tukey:0.5 --length 128 --fov-mm 240 --png tukey.png", "of 128 samples, widths in mm too"],
    ["taper --list", "every window with its formula"],
  ],
  async run(flags, terminal, signal) {
    if (flags.list) return listWindows(terminal);
    if (flags.windows === undefined) {
      const { IncompleteError } = await import("./parse.js");
      throw new IncompleteError("WINDOWS is missing", "See: carillon taper --help", taper);
    }
    const ruler = await rulerOf(flags, terminal, signal);
    const found = await Promise.all(
      (flags.windows as string)
        .split(",")
        .map((text) => measure(text.trim(), flags.shape as WindowShape, ruler)),
    );
    await writeOutputs(flags, found, ruler);
    terminal.result(taperTable(found, ruler, flags.shape as string));
    terminal.document({
      length: ruler.axis?.length ?? null,
      pixelMm: ruler.pixelMm ?? null,
      shape: flags.shape,
      windows: found.map(({ name, figures }) => ({ window: name, ...finiteFigures(figures, ruler.pixelMm) })),
      caution: "For research only, not for diagnosis or treatment.",
    });
  },
};

async function rulerOf(flags: Flags, terminal: Terminal, signal: AbortSignal): Promise<Ruler> {
  const length = flags.length as number | undefined;
  const fovMm = flags["fov-mm"] as number | undefined;
  if (fovMm !== undefined && !(fovMm > 0))
    throw new UsageError({ field: "--fov-mm", value: fovMm }, "must be above 0", "");
  if (flags.raw !== undefined) {
    const axis = await rawAxis(flags, terminal, signal);
    return axis;
  }
  if (fovMm !== undefined && length === undefined)
    throw new UsageError(
      { field: "--fov-mm", value: fovMm },
      "needs the number of samples",
      "Give --length N",
    );
  return {
    axis: length === undefined ? undefined : { length },
    pixelMm: fovMm === undefined ? undefined : fovMm / length!,
  };
}

/** An axis of a raw file as the window meets it: after trimming, with what was acquired of it. */
async function rawAxis(flags: Flags, terminal: Terminal, signal: AbortSignal): Promise<Ruler> {
  const { planRecipe } = await import("../engine/plan.js");
  const { defaultRecipe } = await import("../recipe/default-recipe.js");
  const { axisLength } = await import("../stages/stage.js");
  const raw = flags.raw as string;
  const name = flags.axis as "x" | "y" | "z";
  const { facts } = await scanOfFlags(raw, flags, terminal, signal);
  const { placed } = planRecipe(facts, defaultRecipe(facts, raw).recipe);
  const length = axisLength(placed, name);
  if (length < 2)
    throw new UsageError(
      { field: "--axis", value: name },
      `has ${length} sample in ${raw}`,
      "Choose another axis",
    );
  const { first, last } = placed.acquired[name];
  return { axis: { length, firstSample: first, lastSample: last }, pixelMm: placed.fovMm[name] / length };
}

/** @throws UsageError for what is no window */
async function measure(text: string, shape: WindowShape, { axis }: Ruler): Promise<Measured> {
  const spread = await import("../kernels/point-spread.js");
  const windows = await import("../kernels/window.js");
  if (text.endsWith(".npy")) return measureOwn(text, shape, axis);
  let spec: WindowSpec;
  try {
    spec = windows.parseWindow(text);
  } catch (error) {
    if (!(error instanceof windows.WindowError)) throw error;
    throw new UsageError({ field: "WINDOWS", value: error.value }, error.rule, error.mend);
  }
  const gainsAt = (u: number) => windows.windowGain(spec, Math.abs(u));
  const dimensions = shape === "radial" ? 2 : 1;
  const window = axis
    ? spread.sampledWindow(
        acquiredOnly(windows.windowGrid(spec, shape, Array(dimensions).fill(axis)), axis, dimensions),
        Array(dimensions).fill(axis.length),
      )
    : spread.continuousWindow(spec, shape, dimensions);
  const figures = againstAcquired(spread.windowFigures(window), axis, dimensions);
  // How lobes fall is a property of the window, not of its samples.
  const limit = spread.windowFigures(spread.continuousWindow(spec, shape, dimensions));
  return {
    name: windows.formatWindow(spec),
    window,
    gainsAt,
    figures: { ...figures, sideLobeFallOffDbPerOctave: limit.sideLobeFallOffDbPerOctave },
  };
}

/** Gain and noise against those of the acquired samples without a window, where not all were acquired. */
function againstAcquired(
  figures: WindowFigures,
  axis: WindowAxis | undefined,
  dimensions: number,
): WindowFigures {
  if (!axis) return figures;
  const { length, firstSample = 0, lastSample = length - 1 } = axis;
  const share = ((lastSample - firstSample + 1) / length) ** dimensions;
  return {
    ...figures,
    coherentGain: figures.coherentGain / share,
    equivalentNoiseBandwidthBins: figures.equivalentNoiseBandwidthBins * share,
    noiseFactor: figures.noiseFactor / Math.sqrt(share),
    flatSnrGain: figures.flatSnrGain * Math.sqrt(share),
    pointSnrGain: figures.pointSnrGain / Math.sqrt(share),
  };
}

/** Gains with 0 where nothing was acquired. */
function acquiredOnly(gains: Float64Array, axis: WindowAxis, dimensions: number): Float64Array {
  const { length, firstSample = 0, lastSample = length - 1 } = axis;
  return gains.map((gain, i) => {
    for (let d = 0, rest = i; d < dimensions; d++, rest = Math.floor(rest / length)) {
      const at = rest % length;
      if (at < firstSample || at > lastSample) return 0;
    }
    return gain;
  });
}

async function measureOwn(file: string, shape: WindowShape, axis: WindowAxis | undefined): Promise<Measured> {
  const { sampledWindow, windowFigures } = await import("../kernels/point-spread.js");
  const { readArrays } = await import("../engine/input-arrays.js");
  const { data, shape: sizes } = readArrays([file]).get(file)!;
  const length = sizes[0]!;
  if (sizes.length !== 1 || (axis && axis.length !== length))
    throw new UsageError(
      { file, field: "shape", value: sizes.join(" x ") },
      `must be one line of ${axis?.length ?? "N"} gains`,
      "Save one gain for each sample along the axis",
    );
  if (shape === "radial")
    throw new UsageError(
      { file, field: "--shape", value: shape },
      "a window of samples has no radius",
      "Use separable",
    );
  const window = sampledWindow(Float64Array.from(data));
  const centre = Math.floor(length / 2);
  const gainsAt = (u: number) =>
    data[Math.min(length - 1, Math.max(0, Math.round(centre + (u * length) / 2)))]!;
  return { name: file, window, gainsAt, figures: windowFigures(window) };
}

async function listWindows(terminal: Terminal): Promise<void> {
  const { WINDOWS } = await import("../kernels/window.js");
  const blocks = WINDOWS.map(({ name, parameters, formula, source }) =>
    [
      name,
      wrap(`  w(u) = ${formula}`, 80, "    "),
      ...parameters.map((each) =>
        wrap(`  ${each.name}: ${each.help}, ${each.minimum} to ${each.maximum} ${each.unit}`, 80, "    "),
      ),
      wrap(`  ${source}`, 80, "    "),
    ].join("\n"),
  );
  terminal.result(`u = k/h, k counted from k = 0, h the larger acquired side\n\n${blocks.join("\n")}`);
  terminal.document(
    WINDOWS.map(({ name, parameters, formula, source }) => ({ name, parameters, formula, source })),
  );
}

/** Positions that the point spread is drawn at. */
const REACH_PIXELS = 8;
const STEPS_PER_PIXEL = 32;

async function writeOutputs(flags: Flags, found: readonly Measured[], ruler: Ruler): Promise<void> {
  const [csv, svg, png] = [flags.csv, flags.svg, flags.png] as (string | undefined)[];
  if (csv === undefined && svg === undefined && png === undefined) return;
  const { pointSpread } = await import("../kernels/point-spread.js");
  const { csvText } = await import("../writers/csv.js");
  const { windowDrawing } = await import("../writers/window-chart.js");
  const { drawingSvg } = await import("../writers/drawing-svg.js");
  const { drawingPng } = await import("../writers/drawing-raster.js");
  const { writeFiles } = await import("./write-files.js");
  const u = Float64Array.from({ length: 401 }, (_, i) => i / 200 - 1);
  const count = 2 * REACH_PIXELS * STEPS_PER_PIXEL + 1;
  const positions = Float64Array.from({ length: count }, (_, i) => i / STEPS_PER_PIXEL - REACH_PIXELS);
  const drawing = windowDrawing(
    found.map(({ name, window, gainsAt }) => ({
      name: name.replaceAll(/:[a-z]+=/g, ":"),
      u,
      gains: u.map(gainsAt),
      positionsPixels: positions,
      spread: pointSpread(window, positions),
    })),
  );
  const files = [];
  if (csv !== undefined) {
    const rows = found.map(({ name, figures }) => ({
      window: name,
      ...finiteFigures(figures, ruler.pixelMm),
    }));
    files.push({ file: csv, bytes: csvText(rows) });
  }
  if (svg !== undefined) files.push({ file: svg, bytes: drawingSvg(drawing) });
  if (png !== undefined) files.push({ file: png, bytes: drawingPng(drawing).png });
  await writeFiles(files, flags.force === true);
}
