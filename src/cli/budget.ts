import { UsageError } from "../errors.js";
import type { BudgetPoint, BudgetQuestions, ReadoutPlan } from "../physics/readout-budget.js";
import { type Command, type Flags, type Option, RAW_ARGUMENT, READ_OPTIONS } from "./command.js";
import { scanOfFlags } from "./read-scan.js";
import type { Terminal } from "./terminal.js";

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
    const { budgetTable, budgetRows } = await import("./budget-table.js");
    const asked = sweepOf(flags);
    const { plan, source, directions } = await planOf(flags, terminal, signal);
    const questions = questionsOf(flags, plan);
    await refuseImpossible(flags, plan);
    const found = readoutBudget(plan, questions);
    const presentHz = found.present.pixelBandwidthHz;
    const { low, high, count } = asked ?? { low: presentHz / 4, high: presentHz * 4, count: 9 };
    const points = sweepDwellSeconds(plan, low, high, count).map((dwell) =>
      budgetPoint(plan, questions, dwell),
    );
    const most = flags["max-gradient"] as number | undefined;
    const sweep = points.map((point) => ({
      ...point,
      withinGradient: most === undefined || point.gradientTPerM <= 1e-3 * most,
    }));
    const curve = sweepDwellSeconds(plan, low, high, CURVE_POINTS).map((dwell) =>
      budgetPoint(plan, questions, dwell),
    );
    await writeOutputs(flags, found.present, sweep, curve);
    terminal.result(budgetTable({ source, plan, questions, found, sweep, directions }));
    terminal.document({
      source,
      plan,
      questions: { ...questions, t2StarSeconds: finite(questions.t2StarSeconds) },
      ...found,
      readoutDirections: directions,
      sweep: budgetRows(sweep),
      caution: "For research only, not for diagnosis or treatment.",
    });
  },
};

const finite = (value: number) => (Number.isFinite(value) ? value : null);

/** The readout of the raw file, changed by the flags; or by the flags alone. @throws UsageError for what is missing or no plan */
async function planOf(flags: Flags, terminal: Terminal, signal: AbortSignal) {
  // The parser has checked each type.
  const given = (name: string) => positive(name, flags[name] as number | undefined);
  const { larmorHz } = await import("../physics/larmor.js");
  const raw = flags.raw as string | undefined;
  const base = raw === undefined ? undefined : await scannedPlan(raw, flags, terminal, signal);
  const fovMm = given("fov-mm") ?? base?.plan.fovMm;
  const pixels = given("matrix") ?? base?.plan.pixels;
  if (fovMm === undefined || pixels === undefined)
    throw await incomplete("give RAW, or --fov-mm and --matrix");
  const fieldT = given("field-t") ?? base?.plan.fieldT ?? 1.5;
  const oversampling = given("oversampling") ?? (base ? base.plan.encodedFovMm / base.plan.fovMm : 2);
  if (oversampling < 1)
    throw new UsageError(
      { field: "--oversampling", value: oversampling },
      "must be at least 1",
      "2 is usual",
    );
  const isGeometryOfFile =
    base && ["fov-mm", "matrix", "oversampling"].every((name) => flags[name] === undefined);
  const encoded = isGeometryOfFile
    ? base.plan
    : {
        encodedSamples: Math.round(pixels * oversampling),
        encodedFovMm: (fovMm * Math.round(pixels * oversampling)) / pixels,
      };
  const { encodedSamples, encodedFovMm } = encoded;
  const dwellSeconds = dwellOf(flags, given, fovMm / pixels / encodedFovMm) ?? base?.plan.dwellSeconds;
  if (dwellSeconds === undefined)
    throw await incomplete("give RAW, or one of --pixel-hz, --bandwidth-khz, --dwell-us");
  const plan: ReadoutPlan = {
    fieldT,
    // A header's own resonance frequency is nearer to the truth than the field's.
    resonanceHz: base && flags["field-t"] === undefined ? base.plan.resonanceHz : larmorHz(fieldT),
    encodedSamples,
    encodedFovMm,
    pixels,
    fovMm,
    dwellSeconds,
  };
  return { plan, source: raw ?? "flags", directions: base?.directions ?? ["forward"] };
}

async function incomplete(what: string) {
  const { IncompleteError } = await import("./parse.js");
  return new IncompleteError(what, "See: carillon budget --help", budget);
}

function positive(name: string, value: number | undefined): number | undefined {
  if (value === undefined || value > 0) return value;
  throw new UsageError({ field: `--${name}`, value }, "must be above 0", "");
}

/** Dwell time from whichever of the three flags was given. @param pixelShare a pixel's share of the encoded field of view */
function dwellOf(
  flags: Flags,
  given: (name: string) => number | undefined,
  pixelShare: number,
): number | undefined {
  const names = ["dwell-us", "pixel-hz", "bandwidth-khz"].filter((name) => flags[name] !== undefined);
  if (names.length > 1)
    throw new UsageError(
      { field: `--${names[1]}` },
      `says the same as --${names[0]}`,
      "Give one of --dwell-us, --pixel-hz and --bandwidth-khz",
    );
  const [dwellUs, pixelHz, khz] = [given("dwell-us"), given("pixel-hz"), given("bandwidth-khz")];
  if (dwellUs !== undefined) return dwellUs * 1e-6;
  if (pixelHz !== undefined) return pixelShare / pixelHz;
  return khz === undefined ? undefined : 1 / (khz * 1e3);
}

async function scannedPlan(raw: string, flags: Flags, terminal: Terminal, signal: AbortSignal) {
  const { fieldFromLarmorT } = await import("../physics/larmor.js");
  const { facts } = await scanOfFlags(raw, flags, terminal, signal);
  const { encoded, reconstructed, dwellSeconds, resonanceHz } = facts;
  const plan: ReadoutPlan = {
    fieldT: facts.fieldT ?? fieldFromLarmorT(resonanceHz),
    resonanceHz,
    encodedSamples: encoded.matrix.x,
    encodedFovMm: encoded.fovMm.x,
    pixels: reconstructed.matrix.x,
    fovMm: reconstructed.fovMm.x,
    dwellSeconds,
  };
  return { plan, directions: facts.polarity };
}

function questionsOf(flags: Flags, plan: ReadoutPlan): BudgetQuestions {
  const value = (name: string) => flags[name] as number | undefined;
  if (value("error-ppm") !== undefined && value("error-hz") !== undefined)
    throw new UsageError({ field: "--error-hz" }, "says the same as --error-ppm", "Give one of them");
  return {
    fieldErrorHz: value("error-hz") ?? (value("error-ppm") ?? 1) * 1e-6 * plan.resonanceHz,
    withinPixels: positive("within", value("within")) ?? 0.5,
    t2StarSeconds: (positive("t2star-ms", value("t2star-ms")) ?? Number.POSITIVE_INFINITY) * 1e-3,
    isocentreM: (value("isocentre-mm") ?? 100) * 1e-3,
  };
}

/** @throws UsageError for a gradient beyond the limit, or an object larger than what is encoded */
async function refuseImpossible(flags: Flags, plan: ReadoutPlan): Promise<void> {
  const { gradientLimits } = await import("../physics/readout-budget.js");
  const { readoutBandwidthHz, readoutGradientTPerM } = await import("../physics/bandwidth.js");
  const most = positive("max-gradient", flags["max-gradient"] as number | undefined);
  const gradient =
    1e3 * readoutGradientTPerM(readoutBandwidthHz(plan.dwellSeconds), plan.encodedFovMm * 1e-3);
  if (most !== undefined && gradient > most) {
    const { leastFovMm, mostPixelHz } = gradientLimits(plan, most * 1e-3);
    const share = plan.fovMm / plan.encodedFovMm;
    throw new UsageError(
      { field: "--max-gradient", value: most },
      `the readout needs ${digits(gradient)} mT/m`,
      `Use at most ${digits(mostPixelHz)} Hz per pixel, or a field of view of ${digits(leastFovMm * share)} mm or more`,
    );
  }
  const object = positive("object-mm", flags["object-mm"] as number | undefined);
  if (object !== undefined && object > plan.encodedFovMm)
    throw new UsageError(
      { field: "--object-mm", value: object },
      `is larger than the ${digits(plan.encodedFovMm)} mm that are encoded: its ends come in at the other side`,
      `Use a field of view or an oversampling that encodes ${digits(object)} mm`,
    );
}

function digits(value: number): string {
  return String(Number(value.toPrecision(4)));
}

/** Bandwidths per pixel to go through; those about the present one if left out. @throws UsageError */
function sweepOf(flags: Flags): { low: number; high: number; count: number } | undefined {
  const text = flags.sweep as string | undefined;
  if (text === undefined) return undefined;
  const [low, high, count, ...more] = text.split(":").map(Number);
  const isRight =
    more.length === 0 && low! > 0 && high! > low! && Number.isInteger(count) && count! >= 2 && count! <= 1000;
  if (isRight) return { low: low!, high: high!, count: count! };
  throw new UsageError(
    { field: "--sweep", value: text },
    "must be two bandwidths per pixel, the lower first, and a count of 2 to 1000",
    "For example: --sweep 60:960:9",
  );
}

/** Points of a curve that looks smooth. */
const CURVE_POINTS = 97;

async function writeOutputs(
  flags: Flags,
  present: BudgetPoint,
  sweep: readonly BudgetPoint[],
  curve: readonly BudgetPoint[],
): Promise<void> {
  const names = { csv: flags.csv, svg: flags.svg, png: flags.png } as Record<string, string | undefined>;
  if (Object.values(names).every((name) => name === undefined)) return;
  const { budgetRows } = await import("./budget-table.js");
  const { csvText } = await import("../writers/csv.js");
  const { budgetChart } = await import("../writers/budget-chart.js");
  const { chartPng, chartSvg } = await import("../writers/chart.js");
  const { writeFiles } = await import("./write-files.js");
  const chart = budgetChart(present, curve);
  const made: Record<string, () => string | Uint8Array> = {
    csv: () => csvText(budgetRows(sweep)),
    svg: () => chartSvg(chart),
    png: () => chartPng(chart).png,
  };
  const files = Object.entries(names).flatMap(([kind, file]) =>
    file === undefined ? [] : [{ file, bytes: made[kind]!() }],
  );
  await writeFiles(files, flags.force === true);
}
