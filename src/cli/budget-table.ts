import type { Budget, BudgetPoint, BudgetQuestions, ReadoutPlan } from "../physics/readout-budget.js";
import { wrap } from "./text.js";

type SweepPoint = BudgetPoint & { readonly withinGradient: boolean };

export interface BudgetTable {
  readonly source: string;
  readonly plan: ReadoutPlan;
  readonly questions: BudgetQuestions;
  readonly found: Budget;
  readonly sweep: readonly SweepPoint[];
  readonly directions: readonly string[];
}

/** The budget as a table of 80 columns. */
export function budgetTable({ source, plan, questions, found, sweep, directions }: BudgetTable): string {
  const { present } = found;
  const backward = directions.includes("reverse") ? "; the other way in echoes read backward" : "";
  const px = (pixels: number, mm: number) => `${digits(pixels)} px, ${digits(mm)} mm${backward}`;
  const ms = (seconds: readonly number[]) => seconds.map((each) => digits(each * 1e3)).join(", ");
  const rows: [string, string][] = [
    [
      "readout",
      `${source}: ${digits(plan.fovMm)} mm in ${plan.pixels} pixels, ${plan.encodedSamples} samples over ${digits(plan.encodedFovMm)} mm, ${digits(plan.fieldT)} T`,
    ],
    [
      "bandwidth",
      `${digits(present.bandwidthHz * 1e-3)} kHz, ${digits(present.pixelBandwidthHz)} Hz per pixel`,
    ],
    [
      "dwell time, duration",
      `${digits(present.dwellSeconds * 1e6)} us, ${digits(present.durationSeconds * 1e3)} ms`,
    ],
    ["readout gradient", `${digits(present.gradientTPerM * 1e3)} mT/m`],
    ["fat-water shift", `${px(present.fatPixels, present.fatMm)} (${digits(found.fatHz)} Hz)`],
    [
      "field error",
      `${digits(found.fieldErrorHz)} Hz moves ${px(present.fieldErrorPixels, present.fieldErrorMm)}`,
    ],
    [
      `within ${digits(questions.withinPixels)} px`,
      `fat from ${digits(found.smallestForFatHz)} Hz per pixel on, the field error from ${digits(found.smallestForFieldErrorHz)}`,
    ],
    [
      "point spread",
      `${digits(present.blurPixels)} px wide at half maximum` +
        (Number.isFinite(questions.t2StarSeconds)
          ? `, T2* ${digits(questions.t2StarSeconds * 1e3)} ms`
          : ", no decay"),
    ],
    [
      "concomitant field",
      `${digits(present.concomitantHz)} Hz, ${digits(present.concomitantPixels)} px, ${digits(questions.isocentreM * 1e3)} mm from the isocentre along the field (transverse readout gradient)`,
    ],
    ["fat in phase", `TE ${ms(found.inPhaseSeconds)} ms`],
    ["fat opposed", `TE ${ms(found.opposedPhaseSeconds)} ms`],
  ];
  const width = Math.max(...rows.map(([name]) => name.length)) + 2;
  const head = rows.map(([name, value]) => wrap(name.padEnd(width) + value, 80, " ".repeat(width)));
  return [
    ...head,
    "",
    ...sweepLines(present, sweep),
    "For research only, not for diagnosis or treatment.",
  ].join("\n");
}

const COLUMNS: readonly (readonly [head: string, value: (point: BudgetPoint) => number])[] = [
  ["Hz/px", (point) => point.pixelBandwidthHz],
  ["kHz", (point) => point.bandwidthHz * 1e-3],
  ["dwell us", (point) => point.dwellSeconds * 1e6],
  ["mT/m", (point) => point.gradientTPerM * 1e3],
  ["fat px", (point) => point.fatPixels],
  ["error px", (point) => point.fieldErrorPixels],
  ["SNR", (point) => point.relativeSnr],
  ["blur px", (point) => point.blurPixels],
];

function sweepLines(present: BudgetPoint, sweep: readonly SweepPoint[]): string[] {
  const line = (cells: readonly string[], end: string) =>
    `${cells.map((cell) => cell.padStart(9)).join("")}${end}`.trimEnd();
  const isPresent = (point: BudgetPoint) => Math.abs(point.dwellSeconds / present.dwellSeconds - 1) < 1e-9;
  return [
    line(
      COLUMNS.map(([head]) => head),
      "",
    ),
    ...sweep.map((point) =>
      line(
        COLUMNS.map(([, value]) => digits(value(point))),
        isPresent(point) ? " now" : point.withinGradient ? "" : " beyond",
      ),
    ),
  ];
}

/** The sweep with the units in the names of its columns. */
export function budgetRows(sweep: readonly BudgetPoint[]): Record<string, number | boolean>[] {
  return sweep.map((point) => ({ ...point }));
}

/** Four digits, without an exponent where that is readable. */
function digits(value: number): string {
  return String(Number(value.toPrecision(4)));
}
