import type { BudgetPoint } from "../physics/readout-budget.js";
import { type Command, type Flags, type Option, RAW_ARGUMENT, READ_OPTIONS } from "./command.js";

const number = (value: string, describe: string, byDefault?: string): Option => ({
  type: "number",
  value,
  describe,
  ...(byDefault !== undefined && { byDefault }),
});
const file = (describe: string): Option => ({ type: "text", value: "FILE", describe });

/** `carillon budget`: what a readout costs in displacement, noise, gradient and blur, over bandwidths. */
export const budget: Command = {
  name: "budget",
  usage: "[RAW] [flags]",
  summary: "plan a readout: shift, noise, gradient and blur over bandwidths",
  arguments: [{ ...RAW_ARGUMENT, required: false }],
  options: {
    "fov-mm": number("MM", "field of view along the readout", "the file's"),
    matrix: {
      type: "whole",
      least: 2,
      value: "N",
      describe: "pixels along the readout",
      byDefault: "the file's",
    },
    oversampling: number("FACTOR", "of the readout", "the file's, else 2"),
    "field-t": number("T", "field strength", "the file's, else 1.5"),
    "dwell-us": number("US", "time between samples; or one of the next two", "the file's"),
    "pixel-hz": number("HZ", "bandwidth per pixel"),
    "bandwidth-khz": number("KHZ", "bandwidth of the whole readout, oversampling included"),
    "te-ms": {
      ...number("MS", "echo time, once for each echo", "the file's"),
      repeatable: true,
    },
    "reversed-echoes": {
      type: "text",
      value: "WHICH",
      choices: ["none", "odd", "all"],
      describe: "echoes that are read backward",
      byDefault: "the file's, else none",
    },
    "fat-ppm": number("PPM", "main peak of fat against water", "-3.4"),
    "error-ppm": number("PPM", "field error that nobody corrects", "1"),
    "error-hz": number("HZ", "the same in Hz"),
    within: number("PX", "share of a pixel that a displacement may reach", "0.5"),
    "t2star-ms": number("MS", "T2* of the object", "no decay"),
    "isocentre-mm": number("MM", "distance from the isocentre along the main field", "100"),
    "max-gradient": number("MT/M", "gradient that the scanner has; what needs more is refused"),
    "object-mm": number("MM", "size of the object; what aliases is refused"),
    sweep: {
      type: "text",
      value: "LOW:HIGH:COUNT",
      describe: "bandwidths per pixel, Hz, evenly spaced in their logarithm",
      byDefault: "a quarter to four times the present one, 9",
    },
    csv: file("write the sweep as CSV"),
    svg: file("draw it as SVG"),
    png: file("draw it as PNG"),
    force: { type: "switch", describe: "replace files that exist" },
    ...READ_OPTIONS,
  },
  examples: [
    ["budget scan.h5", "of a scan that there is"],
    ["budget --fov-mm 220 --matrix 256 --pixel-hz 130 --field-t 3", "of one that is planned"],
    ["budget scan.h5 --within 0.25 --png plan.png", "where fat stays within a quarter of a pixel"],
  ],
  async run(flags, terminal, signal) {
    const { readoutBudget, budgetPoint, sweepDwellSeconds } = await import("../physics/readout-budget.js");
    const { echoBudgets } = await import("../physics/echo-budget.js");
    const { fatSpectrumAt, mostOpposedEchoSeconds, spectrumSignal } = await import(
      "../physics/chemical-shift.js"
    );
    const { echoesOf, planOf, questionsOf, sweepOf } = await import("./budget-plan.js");
    const { budgetNotes, refuseImpossible } = await import("./budget-limits.js");
    const { budgetTable, budgetRows } = await import("./budget-table.js");
    const { plan, source, scan } = await planOf(flags, terminal, signal);
    const questions = questionsOf(flags, plan);
    refuseImpossible(flags, plan);
    const found = readoutBudget(plan, questions);
    const span = sweepOf(flags, found.present.pixelBandwidthHz);
    const most = flags["max-gradient"] as number | undefined;
    const over = (count: number) =>
      sweepDwellSeconds(plan, span.lowHz, span.highHz, count).map((dwell) => ({
        ...budgetPoint(plan, questions, dwell),
      }));
    const sweep = over(span.count).map((point) => ({
      ...point,
      withinGradient: most === undefined || point.gradientTPerM <= 1e-3 * most,
    }));
    const echoes = echoBudgets(echoesOf(flags, scan), found.present, questions.fatPpm, plan.resonanceHz);
    const peaks = fatSpectrumAt(questions.fatPpm);
    const seconds = mostOpposedEchoSeconds(peaks, plan.resonanceHz, found.fatHz);
    const [real] = spectrumSignal(peaks, plan.resonanceHz, seconds);
    const mostOpposed = { seconds, real };
    const notes = budgetNotes(flags, plan, found.present, scan);
    await writeOutputs(flags, found.present, questions.withinPixels, sweep, over(CURVE_POINTS));
    if (scan) terminal.discrepancies(scan.discrepancies);
    const parts = { source, plan, questions, found, echoes, mostOpposed, sweep, notes };
    terminal.result(budgetTable({ ...parts, maxGradient: most }));
    terminal.document({
      source,
      plan,
      questions: { ...questions, t2StarSeconds: finite(questions.t2StarSeconds) },
      ...found,
      mostOpposedSixPeaks: mostOpposed,
      readoutDirections: echoesOf(flags, scan).map(({ direction }) => direction),
      echoes,
      sweep: budgetRows(sweep),
      notes,
      caution: "For research only, not for diagnosis or treatment.",
    });
  },
};

const finite = (value: number) => (Number.isFinite(value) ? value : null);

/** Points of a curve that looks smooth. */
const CURVE_POINTS = 97;

async function writeOutputs(
  flags: Flags,
  present: BudgetPoint,
  withinPixels: number,
  sweep: readonly BudgetPoint[],
  curve: readonly BudgetPoint[],
): Promise<void> {
  const names = { csv: flags.csv, svg: flags.svg, png: flags.png } as Record<string, string | undefined>;
  if (Object.values(names).every((name) => name === undefined)) return;
  const { budgetRows } = await import("./budget-table.js");
  const { csvText } = await import("../writers/csv.js");
  const { budgetDrawing } = await import("../writers/budget-chart.js");
  const { drawingPng } = await import("../writers/drawing-raster.js");
  const { drawingSvg } = await import("../writers/drawing-svg.js");
  const { writeFiles } = await import("./write-files.js");
  const drawing = budgetDrawing(present, curve, withinPixels);
  const made: Record<string, () => string | Uint8Array> = {
    csv: () => csvText(budgetRows(sweep)),
    svg: () => drawingSvg(drawing),
    png: () => drawingPng(drawing).png,
  };
  const files = Object.entries(names).flatMap(([kind, file]) =>
    file === undefined ? [] : [{ file, bytes: made[kind]!() }],
  );
  await writeFiles(files, flags.force === true);
}
