import { UsageError } from "../errors.js";
import type { SpectralLine } from "../kernels/fat-water-model.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM, FAT_SPECTRUM } from "../physics/chemical-shift.js";
import type { ScanFacts } from "../physics/scan.js";
import { type EchoTiming, rounded } from "./echo-frame.js";

export const ID = "separate-fat-water";

/** What `separate-fat-water` can be told. */
export interface Params {
  readonly method: "two-point" | "three-point" | "least-squares";
  readonly spectrum: "six-peak" | "one-peak" | readonly (readonly [ppm: number, share: number])[];
  readonly fit: "complex" | "magnitude";
  readonly decay: boolean;
  readonly "echo-phase": boolean;
  readonly "smoothing-px": number;
}

export const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    method: {
      description:
        "how the field is found first: two-point (in and opposed phase), three-point (0, half and one turn of fat), least-squares (three or more echoes, any times)",
      enum: ["two-point", "three-point", "least-squares"],
      default: "least-squares",
    },
    spectrum: {
      description: "of fat: six-peak, one-peak, or a list of [ppm from water, share]",
      default: "six-peak",
      anyOf: [
        { enum: ["six-peak", "one-peak"] },
        {
          type: "array",
          minItems: 1,
          items: { type: "array", items: { type: "number" }, minItems: 2, maxItems: 2 },
        },
      ],
    },
    fit: {
      description: "complex, or of magnitudes (where phases cannot be trusted)",
      enum: ["complex", "magnitude"],
      default: "complex",
    },
    decay: { description: "fit one R2* per pixel for water and fat", type: "boolean", default: false },
    "echo-phase": {
      description: "fit an odd/even phase between echoes read forward and backward",
      type: "boolean",
      default: false,
    },
    "smoothing-px": {
      description: "standard deviation of the window that smooths the field, pixels",
      type: "number",
      minimum: 0,
      default: 2,
    },
  },
};

/** How far fat may be from in phase or opposed at the echoes of the closed forms: a twelfth of a turn. */
const PHASE_TOLERANCE_TURNS = 1 / 12;

/** @throws UsageError for shares that do not add up to something above zero */
export function spectralLines({ spectrum }: Pick<Params, "spectrum">, resonanceHz: number): SpectralLine[] {
  const peaks =
    spectrum === "six-peak"
      ? FAT_SPECTRUM
      : spectrum === "one-peak"
        ? [{ ppm: FAT_MAIN_PEAK_PPM, share: 1 }]
        : spectrum.map(([ppm, share]) => ({ ppm, share }));
  const total = peaks.reduce((sum, { share }) => sum + share, 0);
  if (!(total > 0) || peaks.some(({ share }) => share < 0))
    throw new UsageError(
      { field: `${ID}.spectrum` },
      "the shares of a spectrum must not be negative and add up to more than 0",
      "For example: [[-3.4, 0.75], [0.6, 0.25]]",
    );
  return peaks.map(({ ppm, share }) => ({
    offsetHz: chemicalShiftHz(ppm, resonanceHz),
    share: share / total,
  }));
}

/** Noise against one echo beyond which the echo times do not tell water from fat; good ones give about 1. */
export const MOST_NOISE = 2.5;

/** Turns of fat's main peak at a time, from -1/2 to 1/2. */
function fatTurns(seconds: number, resonanceHz: number): number {
  const turns = chemicalShiftHz(FAT_MAIN_PEAK_PPM, resonanceHz) * seconds;
  return turns - Math.round(turns);
}

const isInPhase = (turns: number) => Math.abs(turns) < PHASE_TOLERANCE_TURNS;
const isOpposed = (turns: number) => 0.5 - Math.abs(turns) < PHASE_TOLERANCE_TURNS;

/** @throws UsageError for echoes that the chosen method cannot work on */
export function checkMethod(
  { method, decay, fit, "echo-phase": echoPhase }: Params,
  timing: EchoTiming,
  scan: ScanFacts,
): void {
  const { echoSeconds, pixelBandwidthHz: bandwidths } = timing;
  const refuse = (key: string, value: unknown, rule: string, mend: string) => {
    throw new UsageError({ field: `${ID}.${key}`, value }, rule, mend);
  };
  const spread = new Set(echoSeconds).size;
  if (spread < echoSeconds.length)
    refuse("method", method, "two echoes have the same time", "Correct them: --set 'scan.echo-ms=[...]'");
  const least = "Use method: least-squares, with three or more echoes";
  if ((decay || fit === "magnitude") && echoSeconds.length < 3)
    refuse(
      decay ? "decay" : "fit",
      decay || fit,
      `needs three echoes, there are ${echoSeconds.length}`,
      least,
    );
  const mixed = new Set(bandwidths).size > 1;
  if (echoPhase && !mixed)
    refuse(
      "echo-phase",
      true,
      "all echoes are read in one direction: there is no odd/even phase",
      "Take it out",
    );
  if (method === "least-squares") return;
  if (mixed)
    refuse("method", method, "compares echoes pixel by pixel: all must be read in one direction", least);
  const turns = echoSeconds.map((seconds) => fatTurns(seconds, scan.resonanceHz));
  const seen = turns.map((turn) =>
    isInPhase(turn) ? "in phase" : isOpposed(turn) ? "opposed" : `${rounded(turn)} turns`,
  );
  if (method === "two-point" && !(seen.includes("in phase") && seen.includes("opposed")))
    refuse("method", method, `needs an echo in phase and one opposed; fat is ${seen.join(", ")}`, least);
  const steps = echoSeconds
    .slice(1, 3)
    .map((seconds, i) => fatTurns(seconds - echoSeconds[i]!, scan.resonanceHz));
  if (method === "three-point" && !(isInPhase(turns[0]!) && steps.every(isOpposed)))
    refuse(
      "method",
      method,
      `needs fat in phase, opposed and in phase; it is ${seen.slice(0, 3).join(", ")}`,
      least,
    );
}
