import { type Axis, axisDomain, type PlacedAxis, placeAxis } from "./chart-axis.js";
import {
  fitted,
  fittedTicks,
  frame,
  LABEL_PT,
  MARGIN_PT,
  NOTE_PT,
  RIGHT_PT,
  TICK_LENGTH_PT,
  TICK_PT,
  TITLE_PT,
  type TopAxis,
  text,
  textWidth,
  topAxisMarks,
  xAxisMarks,
  yAxisMarks,
} from "./chart-frame.js";
import { chartLegend, legendHeight, type SeriesStyle, seriesStyle } from "./chart-legend.js";
import { type Box, clipLine, isInside } from "./clip.js";
import { CAP_SHARE, type Drawing, type Mark, MM_PER_POINT, type Point } from "./drawing.js";
import { drawingPng } from "./drawing-raster.js";
import { drawingSvg } from "./drawing-svg.js";
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
  readonly top?: TopAxis;
  readonly series: readonly Series[];
  readonly references?: readonly ReferenceLine[];
  /** Width on paper; default 85 mm, one column of a journal. */
  readonly widthMm?: number;
  /** Said before the caution at the bottom. */
  readonly note?: string;
  /** Height of the plot itself in shares of the whole width; default 0.5. */
  readonly aspect?: number;
}

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

  const available = widthPt - 2 * MARGIN_PT;
  const titleBottom = MARGIN_PT + TITLE_PT + 3;
  const legendBottom = titleBottom + legendHeight(chart.series, available);
  const topAxisHeight = chart.top ? TICK_LENGTH_PT + TICK_PT + LABEL_PT + 5 : 4;
  const top = legendBottom + topAxisHeight;
  const bottom = top + plotHeight;
  const yTicks = fittedTicks(chart.y, placeAxis(chart.y, yDomain, bottom, top), 6, () => TICK_PT * 1.6);
  const tickWidth = Math.max(...yTicks.map((tick) => textWidth(tick.label, TICK_PT)));
  const left = MARGIN_PT + LABEL_PT + 4 + tickWidth + TICK_LENGTH_PT + 2;
  const box: Box = { left, top, right: widthPt - RIGHT_PT, bottom };

  const x = placeAxis(chart.x, xDomain, box.left, box.right);
  const y = placeAxis(chart.y, yDomain, box.bottom, box.top);
  const styles = chart.series.map((_, i) => seriesStyle(i));
  const heightPt = bottom + TICK_LENGTH_PT + TICK_PT + LABEL_PT + NOTE_PT + 7 + MARGIN_PT;
  const marks: Mark[] = [
    text(
      fitted(chart.title, TITLE_PT, available),
      [MARGIN_PT, MARGIN_PT + TITLE_PT * CAP_SHARE + 1],
      TITLE_PT,
      "start",
      {
        isBold: true,
      },
    ),
    ...chartLegend(chart.series, styles, MARGIN_PT, titleBottom, available),
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

/** A reference line, its label just inside the plot: above a level line at its left, to the right of an upright one. */
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
    ? [box.left + 3, place - 2.5]
    : [isNearRight ? place - 3 : place + 3, box.top + TICK_PT * CAP_SHARE + 3];
  const anchor = isNearRight ? "end" : "start";
  return [line, text(label, labelAt, TICK_PT, anchor, { colour: "#666666" })];
}
