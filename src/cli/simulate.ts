import { type Command, type Flags, wholeNumber } from "./command.js";

/** `carillon simulate`: a raw file of a numerical phantom, whose k-space is exact. */
export const simulate: Command = {
  name: "simulate",
  usage: "",
  summary: "write a raw file of a numerical phantom",
  positionals: {},
  options: {
    out: { type: "string", requiresArg: true, demandOption: true, describe: "raw file to write" },
    phantom: {
      choices: ["belfry", "disc", "shepp-logan", "shepp-logan-modified"],
      default: "belfry",
      describe: "object",
    },
    matrix: { type: "number", requiresArg: true, default: 128, describe: "pixels along read and phase" },
    "fov-mm": { type: "number", requiresArg: true, default: 240, describe: "field of view, mm" },
    oversampling: { type: "number", requiresArg: true, default: 2, describe: "readout oversampling" },
    coils: { type: "number", requiresArg: true, default: 4, describe: "channels" },
    slices: { type: "number", requiresArg: true, default: 1, describe: "slices, interleaved in time" },
    "te-ms": {
      type: "number",
      array: true,
      nargs: 1,
      requiresArg: true,
      describe: "echo time, ms; repeat for more echoes",
    },
    "reversed-echoes": { choices: ["none", "odd", "all"], default: "none", describe: "echoes read backward" },
    repetitions: { type: "number", requiresArg: true, default: 1, describe: "repetitions" },
    averages: { type: "number", requiresArg: true, default: 1, describe: "averages" },
    "dwell-us": { type: "number", requiresArg: true, default: 5, describe: "dwell time, microseconds" },
    "field-t": { type: "number", requiresArg: true, default: 1.5, describe: "field strength, T" },
    "off-resonance-hz": { type: "number", requiresArg: true, default: 0, describe: "constant offset, Hz" },
    "partial-echo": {
      type: "number",
      requiresArg: true,
      default: 1,
      describe: "acquired share of the readout, 0.5 to 1",
    },
    "partial-fourier": {
      type: "number",
      requiresArg: true,
      default: 1,
      describe: "acquired share of the lines, 0.5 to 1",
    },
    noise: {
      type: "number",
      requiresArg: true,
      default: 0.02,
      describe: "noise of coil 0 in an image of intensity 1",
    },
    "noise-readouts": {
      type: "number",
      requiresArg: true,
      default: 4,
      describe: "noise readouts before the scan",
    },
    "rotate-deg": { type: "string", requiresArg: true, describe: "turns about x,y,z: for example 10,0,-20" },
    seed: { type: "number", requiresArg: true, default: 1, describe: "chooses the noise" },
    force: { type: "boolean", default: false, describe: "replace a file that exists" },
  },
  examples: [
    ["simulate --out bell.h5", "then: carillon inspect bell.h5"],
    ["simulate --out echoes.h5 --te-ms 2.4 --te-ms 4.8 --dwell-us 10", "two echoes at half the bandwidth"],
  ],
  async run(flags, terminal) {
    const { simulateRaw } = await import("../simulate/index.js");
    const { file, facts } = await simulateRaw(optionsOf(flags));
    const { noiseCovariance, ...rest } = facts;
    terminal.document({ file, ...rest, noiseCovariance: [...noiseCovariance] });
    terminal.result(file);
    terminal.result(
      `${facts.phantom}: ${facts.imageReadouts} image and ${facts.noiseReadouts} noise readouts, ` +
        `${facts.bandwidthPerPixelHz.toPrecision(4)} Hz per pixel, fat shifted by ${facts.fatShiftPixels.toFixed(2)} px`,
    );
  },
};

type SimulateOptions = Parameters<typeof import("../simulate/index.js")["simulateRaw"]>[0];

function optionsOf(flags: Flags): SimulateOptions {
  const whole = (name: string, least: number) => wholeNumber(flags, name, least);
  const value = (name: string) => flags[name] as number;
  const matrix = whole("matrix", 2)!;
  const echoTimes = flags["te-ms"] as number[] | undefined;
  return {
    file: flags.out as string,
    overwrite: flags.force === true,
    phantom: flags.phantom as SimulateOptions["phantom"],
    matrix: { x: matrix, y: matrix },
    fovMm: { x: value("fov-mm"), y: value("fov-mm") },
    readoutOversampling: value("oversampling"),
    coils: whole("coils", 1),
    slices: whole("slices", 1),
    echoTimesSeconds: echoTimes?.map((ms) => ms * 1e-3),
    reversedEchoes: flags["reversed-echoes"] as SimulateOptions["reversedEchoes"],
    repetitions: whole("repetitions", 1),
    averages: whole("averages", 1),
    dwellSeconds: value("dwell-us") * 1e-6,
    fieldT: value("field-t"),
    offResonanceHz: value("off-resonance-hz"),
    partialEcho: value("partial-echo"),
    partialFourier: value("partial-fourier"),
    noise: { sigma: value("noise"), readouts: whole("noise-readouts", 0) },
    rotationDegrees: rotation(flags["rotate-deg"] as string | undefined),
    seed: whole("seed", 0),
  };
}

function rotation(text: string | undefined): readonly [number, number, number] | undefined {
  if (text === undefined) return undefined;
  const [x = 0, y = 0, z = 0] = text.split(",").map(Number);
  return [x, y, z];
}
