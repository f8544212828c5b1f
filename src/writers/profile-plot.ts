import { pixelPositionMm } from "../physics/layout.js";
import { type Chart, chartPng, chartSvg } from "./chart.js";

export interface ProfileLine {
  readonly label: string;
  /** One value for each pixel along the profile. */
  readonly values: ArrayLike<number>;
}

export interface ProfilePlotOptions {
  readonly title: string;
  readonly lines: readonly ProfileLine[];
  /** Length of a pixel along the profile; position 0 is pixel floor(N/2) of N. */
  readonly pixelMm: number;
  /** Bandwidth per millimetre, with the sign of the readout: shows the frequency above the plot, 0 at position 0. */
  readonly hzPerMm?: number;
  /** What the values are, such as "magnitude". Default "signal". */
  readonly valueLabel?: string;
  readonly unit?: string;
  /** Lines that there are in all, where only some are given: the note then says "k of n lines shown". */
  readonly total?: number;
  readonly widthMm?: number;
}

export interface ProfilePlot {
  readonly svg: string;
  readonly png: Uint8Array;
  /** The pixels of the PNG, RGB. */
  readonly pixels: Uint8Array | Uint16Array;
}

/** One-dimensional data over position in millimetres, and over frequency in hertz where the bandwidth is given. */
export function profilePlot(options: ProfilePlotOptions): ProfilePlot {
  const chart = profileChart(options);
  const { picture, png } = chartPng(chart);
  return { svg: chartSvg(chart), png, pixels: picture.pixels };
}

/** The chart of `profilePlot`, for callers that add to it. */
export function profileChart(options: ProfilePlotOptions): Chart {
  const {
    title,
    lines,
    pixelMm,
    hzPerMm,
    valueLabel = "signal",
    unit,
    total = lines.length,
    widthMm,
  } = options;
  const series = lines.map(({ label, values }) => {
    const fovMm = values.length * pixelMm;
    const x = Array.from(values, (_, i) => pixelPositionMm(i, values.length, fovMm));
    return { name: label, x, y: values };
  });
  return {
    title,
    x: { label: "position", unit: "mm" },
    y: { label: valueLabel, ...(unit !== undefined && { unit }) },
    ...(hzPerMm !== undefined && { top: { label: "frequency offset", unit: "Hz", perX: hzPerMm } }),
    series,
    ...(total > lines.length && { note: `${lines.length} of ${total} lines shown.` }),
    ...(widthMm !== undefined && { widthMm }),
  };
}
