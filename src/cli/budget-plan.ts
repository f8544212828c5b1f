import type { Scan } from "../engine/scan.js";
import { InputError, UsageError } from "../errors.js";
import { FAT_MAIN_PEAK_PPM } from "../physics/chemical-shift.js";
import type { PlannedEcho } from "../physics/echo-budget.js";
import { fieldFromLarmorT, larmorHz } from "../physics/larmor.js";
import type { BudgetQuestions, ReadoutPlan } from "../physics/readout-budget.js";
import { budget } from "./budget.js";
import type { Flags } from "./command.js";
import { IncompleteError } from "./parse.js";
import { scanOfFlags } from "./read-scan.js";
import type { Terminal } from "./terminal.js";

/** Readouts that run straight through k-space at an even pace, or are taken to. */
const STRAIGHT = ["cartesian", "epi", "radial", "goldenangle"];

/**
 * The readout of the raw file, changed by the flags; or by the flags alone.
 * @throws UsageError for what is missing or no plan; InputError for a file whose readouts are not straight
 */
export async function planOf(flags: Flags, terminal: Terminal, signal: AbortSignal) {
  const raw = flags.raw as string | undefined;
  checkFlags(flags);
  const scan = raw === undefined ? undefined : await scanOfFlags(raw, flags, terminal, signal);
  if (scan && !STRAIGHT.includes(scan.facts.trajectory))
    throw new InputError(
      { file: raw, field: "header: trajectory", value: scan.facts.trajectory },
      "a budget is one of straight readouts",
      "Leave the file out and give --fov-mm, --matrix and a bandwidth",
    );
  const base = scan && scannedPlan(scan);
  const geometry = geometryOf(flags, base);
  const fieldT = flags["field-t"] as number | undefined;
  const plan: ReadoutPlan = {
    // A header's resonance frequency is nearer to the truth than its field strength.
    resonanceHz: fieldT === undefined && base ? base.resonanceHz : larmorHz(fieldT ?? DEFAULT_FIELD_T),
    fieldT: fieldT ?? base?.fieldT ?? DEFAULT_FIELD_T,
    ...geometry,
    dwellSeconds: dwellOf(flags, geometry) ?? base?.dwellSeconds ?? missingBandwidth(),
  };
  return { plan, source: raw ?? "flags", scan };
}

export const DEFAULT_FIELD_T = 1.5;
export const DEFAULT_OVERSAMPLING = 2;

type Geometry = Pick<ReadoutPlan, "encodedSamples" | "encodedFovMm" | "pixels" | "fovMm">;

/** Each flag changes one thing: the rest stays as the file has it, to the last digit. */
function geometryOf(flags: Flags, base: ReadoutPlan | undefined): Geometry {
  const given = (name: string) => flags[name] as number | undefined;
  const fovMm = given("fov-mm") ?? base?.fovMm;
  const matrix = given("matrix");
  const pixels = matrix ?? base?.pixels;
  if (fovMm === undefined || pixels === undefined) throw incomplete("give RAW, or --fov-mm and --matrix");
  const oversampling =
    given("oversampling") ?? (base ? base.encodedFovMm / base.fovMm : DEFAULT_OVERSAMPLING);
  if (oversampling < 1)
    throw new UsageError(
      { field: "--oversampling", value: oversampling },
      "must be at least 1",
      "2 is usual",
    );
  // The image of a file can have more pixels than were acquired; one that is planned has as many.
  const acquired = matrix ?? (base ? base.encodedSamples * (base.fovMm / base.encodedFovMm) : pixels);
  const isOwn = base && matrix === undefined && given("oversampling") === undefined;
  const encodedSamples = isOwn ? base.encodedSamples : Math.round(acquired * oversampling);
  const isOwnFov = isOwn && given("fov-mm") === undefined;
  const encodedFovMm = isOwnFov ? base.encodedFovMm : (fovMm * encodedSamples) / acquired;
  return { encodedSamples, encodedFovMm, pixels, fovMm };
}

function scannedPlan({ facts }: Scan): ReadoutPlan {
  const { encoded, reconstructed, dwellSeconds, resonanceHz } = facts;
  return {
    fieldT: fieldFromLarmorT(resonanceHz),
    resonanceHz,
    encodedSamples: encoded.matrix.x,
    encodedFovMm: encoded.fovMm.x,
    pixels: reconstructed.matrix.x,
    fovMm: reconstructed.fovMm.x,
    dwellSeconds,
  };
}

/** Dwell time from whichever of the three flags was given. */
function dwellOf(flags: Flags, { pixels, fovMm, encodedFovMm }: Geometry): number | undefined {
  const [dwellUs, pixelHz, khz] = BANDWIDTHS.map((name) => flags[name] as number | undefined);
  if (dwellUs !== undefined) return dwellUs * 1e-6;
  if (pixelHz !== undefined) return fovMm / pixels / encodedFovMm / pixelHz;
  return khz === undefined ? undefined : 1 / (khz * 1e3);
}

function missingBandwidth(): never {
  throw incomplete("give RAW, or one of --pixel-hz, --bandwidth-khz, --dwell-us");
}

function incomplete(what: string): IncompleteError {
  return new IncompleteError(what, "See: carillon budget --help", budget);
}

const POSITIVE = [
  "fov-mm",
  "matrix",
  "oversampling",
  "field-t",
  "dwell-us",
  "pixel-hz",
  "bandwidth-khz",
  "within",
  "t2star-ms",
  "max-gradient",
  "object-mm",
];

const BANDWIDTHS = ["dwell-us", "pixel-hz", "bandwidth-khz"];
const FIELD_ERRORS = ["error-ppm", "error-hz"];

/** @throws UsageError, before a long file is read */
function checkFlags(flags: Flags): void {
  for (const names of [BANDWIDTHS, FIELD_ERRORS]) {
    const [first, second] = names.filter((name) => flags[name] !== undefined);
    if (second !== undefined)
      throw new UsageError(
        { field: `--${second}` },
        `says the same as --${first}`,
        `Give one of ${names.map((name) => `--${name}`).join(", ")}`,
      );
  }
  sweepOf(flags, 1);
  for (const name of POSITIVE) {
    const value = flags[name] as number | undefined;
    if (value !== undefined && !(value > 0))
      throw new UsageError({ field: `--${name}`, value }, "must be above 0", "");
  }
  const below = (flags["te-ms"] as number[] | undefined)?.find((value) => value < 0);
  if (below !== undefined)
    throw new UsageError({ field: "--te-ms", value: below }, "must not be below 0", "");
  if (flags["fat-ppm"] === 0)
    throw new UsageError({ field: "--fat-ppm", value: 0 }, "must not be 0", "Fat lies at -3.4 or -3.5 ppm");
}

/** The echoes: those of the file, as many as there are `--te-ms`, else one. */
export function echoesOf(flags: Flags, scan: Scan | undefined): PlannedEcho[] {
  const facts = scan?.facts;
  const givenMs = flags["te-ms"] as number[] | undefined;
  const seconds = givenMs?.map((ms) => ms * 1e-3) ?? facts?.echoTimesSeconds ?? [];
  const reversed = flags["reversed-echoes"] as "none" | "odd" | "all" | undefined;
  const directionOf = (echo: number): PlannedEcho["direction"] => {
    if (reversed === undefined) return facts?.polarity[echo] ?? "forward";
    return reversed === "all" || (reversed === "odd" && echo % 2 === 1) ? "reverse" : "forward";
  };
  const count = givenMs?.length ?? facts?.polarity.length ?? 1;
  return Array.from({ length: count }, (_, echo) => ({
    seconds: seconds[echo],
    direction: directionOf(echo),
  }));
}

export function questionsOf(flags: Flags, plan: ReadoutPlan): BudgetQuestions {
  const value = (name: string) => flags[name] as number | undefined;
  return {
    fatPpm: value("fat-ppm") ?? FAT_MAIN_PEAK_PPM,
    fieldErrorHz: value("error-hz") ?? (value("error-ppm") ?? 1) * 1e-6 * plan.resonanceHz,
    withinPixels: value("within") ?? 0.5,
    t2StarSeconds: (value("t2star-ms") ?? Number.POSITIVE_INFINITY) * 1e-3,
    isocentreM: (value("isocentre-mm") ?? 100) * 1e-3,
  };
}

/** Bandwidths per pixel to sweep over. @throws UsageError */
export function sweepOf(
  flags: Flags,
  presentHz: number,
): { readonly lowHz: number; readonly highHz: number; readonly count: number } {
  const text = flags.sweep as string | undefined;
  if (text === undefined) return { lowHz: presentHz / 4, highHz: presentHz * 4, count: 9 };
  const [lowHz = 0, highHz = 0, count = 0, ...more] = text.split(":").map(Number);
  const isSpan = more.length === 0 && lowHz > 0 && highHz > lowHz && Number.isFinite(highHz);
  if (isSpan && Number.isInteger(count) && count >= 2 && count <= 1000) return { lowHz, highHz, count };
  throw new UsageError(
    { field: "--sweep", value: text },
    "must be two bandwidths per pixel, the lower first, and a count of 2 to 1000",
    "For example: --sweep 60:960:9",
  );
}
