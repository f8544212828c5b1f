import { existsSync } from "node:fs";
import path from "node:path";
import { UsageError } from "../errors.js";
import { makeFolder, removeFolders } from "../writers/folder.js";
import { writing } from "../writers/output-file.js";
import type { Command, Option } from "./command.js";
import { inFlags, simulationOf } from "./simulation-flags.js";

const number = (value: string, fallback: number | undefined, describe: string): Option => ({
  type: "number",
  value,
  describe,
  ...(fallback !== undefined && { fallback }),
});
const whole = (least: number, fallback: number, describe: string): Option => ({
  type: "whole",
  value: "N",
  least,
  fallback,
  describe,
});

/** `carillon simulate`: a raw file of a numerical phantom, whose k-space is exact. */
export const simulate: Command = {
  name: "simulate",
  usage: "--out FILE [flags]",
  summary: "write a raw file of a numerical phantom, whose k-space is exact",
  arguments: [],
  options: {
    out: { type: "text", value: "FILE", required: true, describe: "raw file to write; folders are made" },
    force: { type: "switch", describe: "replace a file that exists" },
    phantom: {
      type: "text",
      value: "NAME",
      choices: ["belfry", "disc", "shepp-logan", "shepp-logan-modified"],
      fallback: "belfry",
      describe: "object",
    },
    matrix: whole(2, 128, "pixels along read and phase"),
    "fov-mm": number("MM", 240, "field of view"),
    oversampling: number("FACTOR", 2, "readout oversampling"),
    "partial-echo": number("SHARE", 1, "acquired share of the readout, 0.5 to 1"),
    "partial-fourier": number("SHARE", 1, "acquired share of the lines, 0.5 to 1"),
    coils: whole(1, 4, "channels"),
    slices: whole(1, 1, "slices, interleaved in time"),
    "te-ms": {
      ...number("MS", undefined, "echo time, once for each echo"),
      repeatable: true,
      byDefault: "5",
    },
    "reversed-echoes": {
      type: "text",
      value: "WHICH",
      choices: ["none", "odd", "all"],
      fallback: "none",
      describe: "echoes that are read backward",
    },
    repetitions: whole(1, 1, "repetitions"),
    averages: whole(1, 1, "averages"),
    "dwell-us": number("US", 5, "time between samples, microseconds"),
    "field-t": number("T", 1.5, "field strength"),
    "off-resonance-hz": number("HZ", 0, "constant offset of water and fat"),
    "field-slope": {
      type: "text",
      value: "X,Y",
      describe: "off-resonance that grows along read and phase, Hz per mm, such as 1.5,-0.4",
    },
    noise: number("SIGMA", 0.02, "noise of coil 0 in an image of intensity 1; 0 for none"),
    "noise-readouts": {
      type: "whole",
      value: "N",
      least: 0,
      describe: "noise readouts before the scan",
      byDefault: "4; 0 without noise",
    },
    "rotate-deg": {
      type: "text",
      value: "X,Y,Z",
      describe: "turns about the patient's axes, such as 10,0,-20",
    },
    seed: whole(0, 1, "chooses the noise"),
  },
  examples: [
    ["simulate --out bell.h5", "then: carillon inspect bell.h5"],
    ["simulate --out echoes.h5 --te-ms 2.4 --te-ms 4.8 --dwell-us 10", "two echoes at half the bandwidth"],
  ],
  async run(flags, terminal, signal) {
    const { simulateRaw } = await import("../simulate/index.js");
    const out = flags.out as string;
    if (!flags.force && existsSync(out))
      throw new UsageError({ file: out }, "exists already", "Add --force to replace it.");
    const madeFolders = writing(out, () => makeFolder(path.dirname(out)));
    const onProgress = (done: number, total: number) => terminal.progress("simulating", done, total);
    const { facts } = await simulateRaw({ ...simulationOf(flags), signal, onProgress }).catch((error) => {
      removeFolders(madeFolders);
      throw inFlags(error, flags);
    });
    const { noiseCovariance, ...rest } = facts;
    terminal.document({ file: out, ...rest, noiseCovariance: [...noiseCovariance] });
    terminal.result(out);
    terminal.result(
      `${facts.phantom}: ${facts.imageReadouts} image and ${facts.noiseReadouts} noise readouts, ` +
        `${Math.round(facts.bandwidthPerPixelHz)} Hz per pixel, fat shifted by ${facts.fatShiftPixels.toFixed(2)} px`,
    );
  },
};
