import { type Axis, axisTitle, type PlacedAxis, placeAxis, type Tick, ticksThatFit } from "./chart-axis.js";
import type { Box } from "./clip.js";
import { CAP_SHARE, type Mark, type Point } from "./drawing.js";
import { CAP_ROWS, fitText, textSteps } from "./font.js";

export const INK = "#222222";
const GRID = "#dddddd";
export const TITLE_PT = 8.5;
export const LABEL_PT = 7.5;
export const TICK_PT = 7;
export const NOTE_PT = 6;
export const MARGIN_PT = 5;
/** Room to the right of the plot: half a label's. */
export const RIGHT_PT = 14;
export const TICK_LENGTH_PT = 3;

/** A second axis above the plot: its value is `perX` times that of x, which must be linear. */
export interface TopAxis {
  readonly label: string;
  readonly unit?: string;
  readonly perX: number;
}

/** Ticks of a placed axis, spaced so that labels of the given length along it do not touch or pass `endPt`. */
export function fittedTicks(
  axis: Pick<Axis, "scale">,
  placed: PlacedAxis,
  most: number,
  length: (label: string) => number,
  endPt = Infinity,
) {
  const fits = (ticks: readonly Tick[]) => {
    const labelled = ticks
      .filter((tick) => tick.label !== "")
      .map((tick) => ({ at: placed.place(tick.value), half: length(tick.label) / 2 }))
      .sort((a, b) => a.at - b.at);
    return labelled.every((tick, i) => {
      const next = labelled[i + 1];
      return tick.at + tick.half <= (next ? next.at - next.half : endPt);
    });
  };
  return ticksThatFit(axis.scale ?? "linear", placed.domain, most, fits);
}

/** Ticks, numbers and title of a horizontal axis. */
export function xAxisMarks(
  axis: Pick<Axis, "label" | "unit" | "scale">,
  x: PlacedAxis,
  box: Box,
  side: "below" | "above",
) {
  const edge = side === "below" ? box.bottom : box.top;
  const outward = side === "below" ? 1 : -1;
  const gap = TICK_PT * 0.9; // free space between two labels
  const ticks = fittedTicks(
    axis,
    x,
    8,
    (label) => textWidth(label, TICK_PT) + gap,
    box.right + RIGHT_PT + gap / 2,
  );
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
    text(
      fitted(axisTitle(axis), LABEL_PT, box.right - box.left),
      [(box.left + box.right) / 2, titleBaseline],
      LABEL_PT,
      "middle",
    ),
  ];
  return marks.filter((mark) => mark.kind !== "text" || mark.text !== "");
}

/** The second axis above the plot. */
export function topAxisMarks(top: TopAxis, xDomain: readonly [number, number], box: Box): Mark[] {
  const domain = [xDomain[0] * top.perX, xDomain[1] * top.perX] as const;
  return xAxisMarks(top, placeAxis({ label: top.label }, domain, box.left, box.right), box, "above");
}

/** Ticks, numbers and title of the vertical axis, and its level lines across the plot. */
export function yAxisMarks(axis: Axis, y: PlacedAxis, ticks: readonly Tick[], box: Box): Mark[] {
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
    text(
      fitted(axisTitle(axis), LABEL_PT, box.bottom - box.top),
      [MARGIN_PT + LABEL_PT * CAP_SHARE + 1, middle],
      LABEL_PT,
      "middle",
      {
        isVertical: true,
      },
    ),
  ];
}

/** The rectangle round the plot. */
export function frame({ left, top, right, bottom }: Box): Mark {
  const corners: Point[] = [[left, top], [right, top], [right, bottom], [left, bottom], [left, top]]; // biome-ignore format: round
  return { kind: "lines", pieces: [corners], colour: INK, widthPt: 0.7 };
}

/** Width of text as the built-in font draws it; common sans-serif fonts are about as wide. */
export function textWidth(text: string, sizePt: number): number {
  return (textSteps(text) * sizePt * CAP_SHARE) / CAP_ROWS;
}

/** The text, cut where it is wider than `widthPt`. */
export function fitted(text: string, sizePt: number, widthPt: number): string {
  return fitText(text, (widthPt * CAP_ROWS) / (sizePt * CAP_SHARE));
}

/** A text mark. */
export function text(
  content: string,
  at: Point,
  sizePt: number,
  anchor: "start" | "middle" | "end",
  more: { colour?: string; isBold?: boolean; isVertical?: boolean } = {},
): Mark {
  return { kind: "text", text: content, at, sizePt, anchor, colour: INK, ...more };
}
