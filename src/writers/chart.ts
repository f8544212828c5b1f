import {
  type Axis,
  axisDomain,
  axisTitle,
  type PlacedAxis,
  placeAxis,
  type Tick,
  ticksThatFit,
} from "./chart-axis.js";
import { chartLegend, legendHeight, type SeriesStyle, seriesStyle } from "./chart-legend.js";
import { type Box, clipLine, isInside } from "./clip.js";
import { CAP_SHARE, type Drawing, type Mark, MM_PER_POINT, type Point } from "./drawing.js";
import { drawingPng } from "./drawing-raster.js";
import { drawingSvg } from "./drawing-svg.js";
import { CAP_ROWS, textSteps } from "./font.js";
import { CAUTION, type Picture } from "./png.js";

export interface Series {
  readonly name: string;
  readonly x: ArrayLike<number>;
  /** As many as x; NaN leaves a gap. */
  readonly y: ArrayLike<number>;
  /** Default line. */
  readonly mark?: "line" | "points" | "both";
}

/** A thin line across the plot at one value of an axis, with its name beside it. */
export interface ReferenceLine {
  readonly axis: "x" | "y";
  readonly at: number;
  readonly label: string;
}

export interface Chart {
  readonly title: string;
  readonly x: Axis;
  readonly y: Axis;
  /** A second axis above the plot: its value is `perX` times that of x, which must be linear. */
  readonly top?: { readonly label: string; readonly unit?: string; readonly perX: number };
  readonly series: readonly Series[];
  readonly references?: readonly ReferenceLine[];
  /** Width on paper; default 85 mm, one column of a journal. */
  readonly widthMm?: number;
  /** Said before the caution at the bottom. */
  readonly note?: string;
  /** Height of the plot itself in shares of the whole width; default 0.5. */
  readonly aspect?: number;
}

const INK = "#222222";
const GRID = "#dddddd";
const TITLE_PT = 8.5;
const LABEL_PT = 7.5;
const TICK_PT = 7;
const NOTE_PT = 6;
const MARGIN_PT = 5;
const TICK_LENGTH_PT = 3;

/** The chart as SVG text. */
export function chartSvg(chart: Chart): string {
  return drawingSvg(chartDrawing(chart));
}

/** The chart as PNG, at 300 pixels an inch if not said otherwise. */
export function chartPng(chart: Chart, pixelsPerInch?: number): { picture: Picture; png: Uint8Array } {
  return drawingPng(chartDrawing(chart), pixelsPerInch);
}

/** Lay a chart out: from the top title, legend, upper axis, plot, lower axis, caution. */
export function chartDrawing(chart: Chart): Drawing {
  for (const { name, x, y } of chart.series) {
    if (x.length !== y.length) throw new RangeError(`${name}: ${x.length} x values, ${y.length} y values`);
  }
  const widthPt = (chart.widthMm ?? 85) / MM_PER_POINT;
  const plotHeight = (chart.aspect ?? 0.5) * widthPt;
  const isTight = chart.series.every((series) => series.mark !== "points");
  const xDomain = axisDomain(chart.x, valuesOf(chart, "x"), isTight);
  const yDomain = axisDomain(chart.y, valuesOf(chart, "y"), false);

  const titleBottom = MARGIN_PT + TITLE_PT + 3;
  const legendBottom = titleBottom + legendHeight(chart.series, widthPt - 2 * MARGIN_PT);
  const topAxisHeight = chart.top ? TICK_LENGTH_PT + TICK_PT + LABEL_PT + 5 : 4;
  const top = legendBottom + topAxisHeight;
  const bottom = top + plotHeight;
  const yTicks = fittedTicks(chart.y, placeAxis(chart.y, yDomain, bottom, top), 6, () => TICK_PT * 1.6);
  const tickWidth = Math.max(...yTicks.map((tick) => textWidth(tick.label, TICK_PT)));
  const left = MARGIN_PT + LABEL_PT + 4 + tickWidth + TICK_LENGTH_PT + 2;
  const box: Box = { left, top, right: widthPt - 14, bottom }; // half a label's room

  const x = placeAxis(chart.x, xDomain, box.left, box.right);
  const y = placeAxis(chart.y, yDomain, box.bottom, box.top);
  const styles = chart.series.map((_, i) => seriesStyle(i));
  const heightPt = bottom + TICK_LENGTH_PT + TICK_PT + LABEL_PT + NOTE_PT + 7 + MARGIN_PT;
  const marks: Mark[] = [
    text(chart.title, [MARGIN_PT, MARGIN_PT + TITLE_PT * CAP_SHARE + 1], TITLE_PT, "start", { isBold: true }),
    ...chartLegend(chart.series, styles, MARGIN_PT, titleBottom, widthPt - 2 * MARGIN_PT),
    ...yAxisMarks(chart.y, y, yTicks, box),
    ...xAxisMarks(chart.x, x, box, "below"),
    ...(chart.top ? topAxisMarks(chart.top, xDomain, box) : []),
    frame(box),
    ...(chart.references ?? []).flatMap((reference) => referenceMarks(reference, x, y, box)),
    ...chart.series.flatMap((series, i) => seriesMarks(series, styles[i] ?? seriesStyle(i), x, y, box)),
    text(
      [chart.note, CAUTION].filter(Boolean).join(" "),
      [MARGIN_PT, heightPt - MARGIN_PT],
      NOTE_PT,
      "start",
      { colour: "#666666" },
    ),
  ];
  return { widthPt, heightPt, title: chart.title, marks };
}

function* valuesOf(chart: Chart, axis: "x" | "y"): Generator<number> {
  for (const series of chart.series) yield* Array.from(series[axis]);
  for (const reference of chart.references ?? []) if (reference.axis === axis) yield reference.at;
}

/** Ticks of a placed axis, spaced so that labels of the given length along it do not touch. */
function fittedTicks(
  axis: Pick<Axis, "scale">,
  placed: PlacedAxis,
  most: number,
  length: (label: string) => number,
) {
  const fits = (ticks: readonly Tick[]) => {
    const labelled = ticks
      .filter((tick) => tick.label !== "")
      .map((tick) => ({ at: placed.place(tick.value), half: length(tick.label) / 2 }))
      .sort((a, b) => a.at - b.at);
    return labelled.every((tick, i) => {
      const next = labelled[i + 1];
      return !next || next.at - next.half >= tick.at + tick.half;
    });
  };
  return ticksThatFit(axis.scale ?? "linear", placed.domain, most, fits);
}

function xAxisMarks(
  axis: Pick<Axis, "label" | "unit" | "scale">,
  x: PlacedAxis,
  box: Box,
  side: "below" | "above",
) {
  const edge = side === "below" ? box.bottom : box.top;
  const outward = side === "below" ? 1 : -1;
  const gap = TICK_PT * 0.9; // free space between two labels
  const ticks = fittedTicks(axis, x, 8, (label) => textWidth(label, TICK_PT) + gap);
  const capital = TICK_PT * CAP_SHARE;
  const tickBaseline = edge + outward * (TICK_LENGTH_PT + 2) + (side === "below" ? capital : 0);
  const titleBaseline = tickBaseline + outward * (LABEL_PT + 2.5);
  const lines = (length: (tick: Tick) => number) =>
    ticks.map((tick): Point[] => {
      const at = x.place(tick.value);
      return [[at, edge], [at, edge + outward * length(tick)]]; // biome-ignore format: two ends
    });
  const marks: Mark[] = [
    {
      kind: "lines",
      colour: INK,
      widthPt: 0.6,
      pieces: lines((tick) => TICK_LENGTH_PT / (tick.label ? 1 : 2)),
    },
    ...ticks.map((tick) => text(tick.label, [x.place(tick.value), tickBaseline], TICK_PT, "middle")),
    text(axisTitle(axis), [(box.left + box.right) / 2, titleBaseline], LABEL_PT, "middle"),
  ];
  return marks.filter((mark) => mark.kind !== "text" || mark.text !== "");
}

function topAxisMarks(top: NonNullable<Chart["top"]>, xDomain: readonly [number, number], box: Box): Mark[] {
  const domain = [xDomain[0] * top.perX, xDomain[1] * top.perX] as const;
  return xAxisMarks(top, placeAxis({ label: top.label }, domain, box.left, box.right), box, "above");
}

function yAxisMarks(axis: Axis, y: PlacedAxis, ticks: readonly Tick[], box: Box): Mark[] {
  const across = (from: number, to: number, chosen: readonly Tick[]) =>
    chosen.map((tick): Point[] => {
      const at = y.place(tick.value);
      return [[from, at], [to, at]]; // biome-ignore format: two ends
    });
  const labelled = ticks.filter((tick) => tick.label !== "");
  const small = ticks.filter((tick) => tick.label === "");
  const labelRight = box.left - TICK_LENGTH_PT - 2;
  const middle = (box.top + box.bottom) / 2;
  return [
    { kind: "lines", colour: GRID, widthPt: 0.5, pieces: across(box.left, box.right, labelled) },
    {
      kind: "lines",
      colour: INK,
      widthPt: 0.6,
      pieces: across(box.left - TICK_LENGTH_PT, box.left, labelled),
    },
    {
      kind: "lines",
      colour: INK,
      widthPt: 0.6,
      pieces: across(box.left - TICK_LENGTH_PT / 2, box.left, small),
    },
    ...labelled.map((tick) => {
      const baseline = y.place(tick.value) + (TICK_PT * CAP_SHARE) / 2;
      return text(tick.label, [labelRight, baseline], TICK_PT, "end");
    }),
    text(axisTitle(axis), [MARGIN_PT + LABEL_PT * CAP_SHARE + 1, middle], LABEL_PT, "middle", {
      isVertical: true,
    }),
  ];
}

function seriesMarks(series: Series, style: SeriesStyle, x: PlacedAxis, y: PlacedAxis, box: Box): Mark[] {
  const points = Array.from(
    series.x,
    (value, i): Point => [x.place(value), y.place(series.y[i] ?? Number.NaN)],
  );
  const marks: Mark[] = [];
  if (series.mark !== "points") marks.push({ kind: "lines", pieces: clipLine(points, box), ...style });
  if (series.mark === "points" || series.mark === "both") {
    const centres = points.filter((point) => isInside(point, box));
    marks.push({ kind: "dots", centres, colour: style.colour, radiusPt: 1.6 });
  }
  return marks;
}

/** A reference line, its label just inside the plot: above a level line, to the right of an upright one. */
function referenceMarks({ axis, at, label }: ReferenceLine, x: PlacedAxis, y: PlacedAxis, box: Box): Mark[] {
  const isLevel = axis === "y";
  const place = isLevel ? y.place(at) : x.place(at);
  const ends: Point[] = isLevel
    ? [[box.left, place], [box.right, place]] // biome-ignore format: two ends
    : [[place, box.top], [place, box.bottom]]; // biome-ignore format: two ends
  if (!ends.every((end) => isInside(end, box))) return [];
  const line: Mark = { kind: "lines", pieces: [ends], colour: "#666666", widthPt: 0.7, dashPt: [1, 2] };
  const isNearRight = !isLevel && place + 4 + textWidth(label, TICK_PT) > box.right;
  const labelAt: Point = isLevel
    ? [box.right - 3, place - 2.5]
    : [isNearRight ? place - 3 : place + 3, box.top + TICK_PT * CAP_SHARE + 3];
  const anchor = isLevel || isNearRight ? "end" : "start";
  return [line, text(label, labelAt, TICK_PT, anchor, { colour: "#666666" })];
}

function frame({ left, top, right, bottom }: Box): Mark {
  const corners: Point[] = [[left, top], [right, top], [right, bottom], [left, bottom], [left, top]]; // biome-ignore format: round
  return { kind: "lines", pieces: [corners], colour: INK, widthPt: 0.7 };
}

/** Width of text as the built-in font draws it; common sans-serif fonts are about as wide. */
export function textWidth(text: string, sizePt: number): number {
  return (textSteps(text) * sizePt * CAP_SHARE) / CAP_ROWS;
}

function text(
  content: string,
  at: Point,
  sizePt: number,
  anchor: "start" | "middle" | "end",
  more: { colour?: string; isBold?: boolean; isVertical?: boolean } = {},
): Mark {
  return { kind: "text", text: content, at, sizePt, anchor, colour: INK, ...more };
}
