import { CAP_SHARE, type Mark } from "./drawing.js";
import { flow } from "./flow.js";
import { CAP_ROWS, fitText, textSteps } from "./font.js";

/** How a series is drawn: told apart by colour and, without colour, by its dashes. */
export interface SeriesStyle {
  readonly colour: string;
  readonly widthPt: number;
  readonly dashPt?: readonly number[];
}

/**
 * Colours that people with any common colour blindness tell apart, the yellow left out for its contrast on white.
 * Source: Okabe and Ito 2008, Color Universal Design; Wong 2011, Nat Methods 8:441, doi:10.1038/nmeth.1618.
 */
const COLOURS = ["#0072b2", "#d55e00", "#009e73", "#cc79a7", "#000000", "#e69f00", "#56b4e9"] as const;
const DASHES = [undefined, [5, 2], [1.5, 1.5], [6, 2, 1.5, 2]] as const;

/** The style of the series with this index: seven colours by four dash patterns before a pair comes again. */
export function seriesStyle(index: number): SeriesStyle {
  const colour = COLOURS[index % COLOURS.length] ?? COLOURS[0];
  const dashPt = DASHES[index % DASHES.length];
  return { colour, widthPt: 1.2, ...(dashPt ? { dashPt } : {}) };
}

const TEXT_PT = 7;
/** One grid step of the font. */
const STEP_PT = (TEXT_PT * CAP_SHARE) / CAP_ROWS;
const SAMPLE_PT = 16;
const LINE_PT = 10;
const GAP_PT = 10;

interface Entry {
  readonly name: string;
  readonly mark?: "line" | "points" | "both";
}

/** Height of the legend; none for a single series, whose name the title or axis gives. */
export function legendHeight(series: readonly Entry[], widthPt: number): number {
  if (series.length < 2) return 0;
  return ((places(series, widthPt).at(-1)?.line ?? 0) + 1) * LINE_PT + 2;
}

/** A sample and the name of each series, set in lines from `left`, `top` on. */
export function chartLegend(
  series: readonly Entry[],
  styles: readonly SeriesStyle[],
  left: number,
  top: number,
  widthPt: number,
): Mark[] {
  if (series.length < 2) return [];
  return places(series, widthPt).flatMap((place, i): Mark[] => {
    const { name, mark } = series[i] ?? { name: "" };
    const style = styles[i] ?? seriesStyle(i);
    const start = left + place.left;
    const baseline = top + place.line * LINE_PT + LINE_PT - 2.5;
    const middle = baseline - (TEXT_PT * CAP_SHARE) / 2;
    const sample: Mark[] = [];
    if (mark !== "points") {
      sample.push({ kind: "lines", pieces: [[[start, middle], [start + SAMPLE_PT, middle]]], ...style }); // biome-ignore format: one line
    }
    if (mark === "points" || mark === "both") {
      sample.push({
        kind: "dots",
        centres: [[start + SAMPLE_PT / 2, middle]],
        colour: style.colour,
        radiusPt: 1.6,
      });
    }
    const at = [start + SAMPLE_PT + 4, baseline] as const;
    return [
      ...sample,
      { kind: "text", text: shown(name, widthPt), at, anchor: "start", sizePt: TEXT_PT, colour: "#222222" },
    ];
  });
}

function places(series: readonly Entry[], widthPt: number) {
  const widths = series.map(({ name }) => SAMPLE_PT + 4 + textSteps(shown(name, widthPt)) * STEP_PT);
  return flow(widths, GAP_PT, widthPt);
}

/** A name, cut where it is wider than the whole legend. */
function shown(name: string, widthPt: number): string {
  return fitText(name, (widthPt - SAMPLE_PT - 4) / STEP_PT);
}
