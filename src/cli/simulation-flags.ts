import { UsageError } from "../errors.js";
import type { Flags } from "./command.js";

type SimulateOptions = Parameters<typeof import("../simulate/index.js")["simulateRaw"]>[0];

/** What the flags of `carillon simulate` ask for. @throws UsageError */
export function simulationOf(flags: Flags): SimulateOptions {
  const value = (name: string) => flags[name] as number; // the parser has checked each type and filled in defaults
  const noise = value("noise");
  return {
    file: flags.out as string,
    overwrite: flags.force === true,
    phantom: flags.phantom as SimulateOptions["phantom"],
    matrix: { x: value("matrix"), y: value("matrix") },
    fovMm: { x: value("fov-mm"), y: value("fov-mm") },
    readoutOversampling: value("oversampling"),
    coils: value("coils"),
    slices: value("slices"),
    echoTimesSeconds: (flags["te-ms"] as number[] | undefined)?.map((ms) => ms * 1e-3),
    reversedEchoes: flags["reversed-echoes"] as SimulateOptions["reversedEchoes"],
    repetitions: value("repetitions"),
    averages: value("averages"),
    dwellSeconds: value("dwell-us") * 1e-6,
    fieldT: value("field-t"),
    offResonanceHz: value("off-resonance-hz"),
    partialEcho: value("partial-echo"),
    partialFourier: value("partial-fourier"),
    noise: {
      sigma: noise,
      readouts: (flags["noise-readouts"] as number | undefined) ?? (noise === 0 ? 0 : DEFAULT_NOISE_READOUTS),
    },
    fieldSlopeHzPerMm: slope(flags["field-slope"] as string | undefined),
    rotationDegrees: rotation(flags["rotate-deg"] as string | undefined),
    seed: value("seed"),
  };
}

const DEFAULT_NOISE_READOUTS = 4;

function slope(text: string | undefined): { x: number; y: number } | undefined {
  if (text === undefined) return undefined;
  const [x, y] = numbers("--field-slope", text, 2, "two slopes in Hz per mm", "1.5,-0.4");
  return { x: x!, y: y! };
}

function rotation(text: string | undefined): readonly [number, number, number] | undefined {
  if (text === undefined) return undefined;
  const [x, y, z] = numbers("--rotate-deg", text, 3, "three angles in degrees", "10,0,-20");
  return [x!, y!, z!];
}

/** Numbers with commas between. @throws UsageError */
function numbers(flag: string, text: string, count: number, what: string, example: string): number[] {
  const parts = text.split(",").map((part) => (part.trim() === "" ? Number.NaN : Number(part)));
  if (parts.length === count && parts.every(Number.isFinite)) return parts;
  throw new UsageError(
    { field: flag, value: text },
    `must be ${what}, with commas between`,
    `For example: ${flag}=${example}`,
  );
}

/** The simulator's names of options, by the flags that set them. */
const FLAG_OF: Readonly<Record<string, string>> = {
  "matrix.x": "matrix",
  "matrix.y": "matrix",
  "matrix.x times readoutOversampling": "oversampling",
  "fovMm.x": "fov-mm",
  "fovMm.y": "fov-mm",
  readoutOversampling: "oversampling",
  partialEcho: "partial-echo",
  partialFourier: "partial-fourier",
  dwellSeconds: "dwell-us",
  fieldT: "field-t",
  offResonanceHz: "off-resonance-hz",
  "noise.sigma": "noise",
  "noise.readouts": "noise-readouts",
};

/** An error about an option of the simulator, as one about the flag that the user gave. */
export function inFlags(error: unknown, flags: Flags): unknown {
  if (!(error instanceof UsageError) || error.place.field === undefined) return error;
  const { field } = error.place;
  const echo = /^echoTimesSeconds\[(\d+)\]$/.exec(field)?.[1];
  if (echo !== undefined) {
    const value = (flags["te-ms"] as number[] | undefined)?.[Number(echo)];
    const rule = error.rule.replace(
      /([\d.e-]+) s\b/,
      (_, seconds) => `${Number((1e3 * seconds).toPrecision(6))} ms`,
    );
    return new UsageError({ field: "--te-ms", value }, rule, error.mend, {
      cause: error,
    });
  }
  const flag = FLAG_OF[field] ?? field;
  const value = flags[flag];
  return new UsageError({ field: `--${flag}`, value }, error.rule, error.mend, { cause: error });
}
