import type { EchoBudget } from "../physics/echo-budget.js";
import type { Budget, BudgetPoint, BudgetQuestions, ReadoutPlan } from "../physics/readout-budget.js";
import { wrap } from "./text.js";

type SweepPoint = BudgetPoint & { readonly withinGradient: boolean };

export interface BudgetTable {
  readonly source: string;
  readonly plan: ReadoutPlan;
  readonly questions: BudgetQuestions;
  readonly found: Budget;
  readonly echoes: readonly EchoBudget[];
  /** When six-peak fat is most opposed to water, and its signal then. */
  readonly mostOpposed: { readonly seconds: number; readonly real: number };
  readonly sweep: readonly SweepPoint[];
  readonly notes: readonly string[];
  /** mT/m; undefined without a limit. */
  readonly maxGradient: number | undefined;
}

/** The budget as a table of 80 columns. */
export function budgetTable(table: BudgetTable): string {
  const { found, echoes, sweep, notes } = table;
  const rows = [...planRows(table), ...offsetRows(table), ...echoTimeRows(table)];
  const width = Math.max(...rows.map(([name]) => name.length)) + 2;
  const isPlain = echoes.every(({ direction, fatSignal }) => direction === "forward" && fatSignal === null);
  return [
    ...rows.map(([name, value]) => wrap(name.padEnd(width) + value, 80, " ".repeat(width))),
    ...(isPlain ? [] : ["", ...echoLines(echoes)]),
    "",
    ...sweepLines(found.present, sweep),
    ...(notes.length ? [""] : []),
    ...notes.map((note) => wrap(`note: ${note}`, 80, "  ")),
    "For research only, not for diagnosis or treatment.",
  ].join("\n");
}

type Row = readonly [name: string, value: string];

function planRows({ source, plan, questions, found: { present }, echoes }: BudgetTable): Row[] {
  const early = echoes
    .map(({ echoTimeSeconds }) => echoTimeSeconds ?? Number.POSITIVE_INFINITY)
    .filter((seconds) => seconds < present.durationSeconds / 2);
  const partial = early.map((seconds) => `TE ${digits(seconds * 1e3)} ms`).join(", ");
  const pixelMm = plan.fovMm / plan.pixels;
  const acquiredMm = plan.encodedFovMm / plan.encodedSamples;
  const isInterpolated = Math.abs(acquiredMm / pixelMm - 1) > 1e-3;
  const decay = Number.isFinite(questions.t2StarSeconds)
    ? `, T2* ${digits(questions.t2StarSeconds * 1e3)} ms`
    : ", no decay";
  return [
    [
      "readout",
      `${source}: ${digits(plan.fovMm)} mm in ${plan.pixels} pixels, ${plan.encodedSamples} samples over ${digits(plan.encodedFovMm)} mm`,
    ],
    ["field", `${digits(plan.fieldT)} T, resonance ${(plan.resonanceHz * 1e-6).toFixed(6)} MHz`],
    [
      "bandwidth",
      `${digits(present.bandwidthHz * 1e-3)} kHz, ${digits(present.pixelBandwidthHz)} Hz per pixel of ${digits(pixelMm)} mm` +
        (isInterpolated
          ? ` (interpolated; ${digits(present.bandwidthHz / plan.encodedSamples)} Hz per acquired pixel of ${digits(acquiredMm)} mm)`
          : ""),
    ],
    [
      "dwell time, duration",
      `${digits(present.dwellSeconds * 1e6)} us, ${digits(present.durationSeconds * 1e3)} ms; ` +
        `a full echo begins ${digits(present.durationSeconds * 500)} ms before TE` +
        (early.length ? `: ${partial} needs a partial one` : ""),
    ],
    ["readout gradient", `${digits(present.gradientTPerM * 1e3)} mT/m`],
    [
      "point spread",
      `${digits(present.blurPixels)} px, ${digits(present.blurMm)} mm wide at half maximum${decay}`,
    ],
  ];
}

function offsetRows({ questions, found, echoes, maxGradient }: BudgetTable): Row[] {
  const { present } = found;
  const isForward = echoes.every(({ direction }) => direction === "forward");
  const forward = isForward ? "" : " on a forward readout";
  const px = (pixels: number, mm: number) => `${digits(pixels)} px, ${digits(mm)} mm${forward}`;
  const cost = (point: BudgetPoint | null) => {
    if (!point) return "at any bandwidth";
    const mTPerM = point.gradientTPerM * 1e3;
    const beyond = maxGradient !== undefined && mTPerM > maxGradient ? ", beyond the limit" : "";
    return `from ${digits(point.pixelBandwidthHz)} Hz per pixel on (SNR ${digits(point.relativeSnr)} of now, ${digits(mTPerM)} mT/m${beyond})`;
  };
  return [
    [
      "fat-water shift",
      `${px(present.fatPixels, present.fatMm)} (${digits(questions.fatPpm)} ppm, ${digits(found.fatHz)} Hz)`,
    ],
    [
      "field error",
      `${digits(found.fieldErrorHz)} Hz moves ${px(present.fieldErrorPixels, present.fieldErrorMm)}`,
    ],
    [`within ${digits(questions.withinPixels)} px`, `fat ${cost(found.atSmallestForFat)}`],
    ["", `the field error ${cost(found.atSmallestForFieldError)}`],
    [
      "concomitant field",
      `${digits(present.concomitantHz)} Hz, ${digits(present.concomitantPixels)} px, ${digits(questions.isocentreM * 1e3)} mm from the isocentre along the field (transverse readout gradient)`,
    ],
  ];
}

function echoTimeRows({ found, mostOpposed }: BudgetTable): Row[] {
  const ms = (seconds: readonly number[]) => seconds.map((each) => digits(each * 1e3)).join(", ");
  return [
    ["fat in phase", `TE ${ms(found.inPhaseSeconds)} ms`],
    [
      "fat opposed",
      `TE ${ms(found.opposedPhaseSeconds)} ms; with six peaks most at ${digits(mostOpposed.seconds * 1e3)} ms (${digits(mostOpposed.real)})`,
    ],
  ];
}

function echoLines(echoes: readonly EchoBudget[]): string[] {
  const line = (cells: readonly string[], signal: string) =>
    `${cells.map((cell) => cell.padStart(9)).join("")}  ${signal}`.trimEnd();
  const heads = ["echo", "TE ms", "read", "fat px", "fat mm", "error px"];
  return [
    line(heads, "six-peak fat"),
    ...echoes.map((echo) =>
      line(
        [
          String(echo.echo),
          echo.echoTimeSeconds === null ? "?" : digits(echo.echoTimeSeconds * 1e3),
          echo.direction,
          digits(echo.fatPixels),
          digits(echo.fatMm),
          digits(echo.fieldErrorPixels),
        ],
        echo.fatSignal
          ? `${echo.fatSignal.magnitude.toFixed(3)} at ${Math.round(echo.fatSignal.phaseDegrees)} deg`
          : "",
      ),
    ),
  ];
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
