import type { Terminal } from "./terminal.js";

/** Values of a command's flags and arguments, checked; each command knows its own. */
export type Flags = Readonly<Record<string, unknown>>;

/** Where the value of each flag comes from: `flag`, the name of the environment variable, or `default`. */
export type Origins = Readonly<Record<string, string>>;

/** One flag: its type, and what help says of it. */
export interface Option {
  readonly type: "text" | "number" | "whole" | "switch";
  readonly describe: string;
  /** What help and usage call the value: FOLDER, MM. */
  readonly value?: string;
  readonly choices?: readonly string[];
  /** Least value of a whole number. */
  readonly least?: number;
  /** The flag may be given more than once; its value is a list. */
  readonly repeatable?: boolean;
  readonly required?: boolean;
  readonly fallback?: string | number;
  /** What help says of the default where it is no fixed value. */
  readonly byDefault?: string;
  readonly hidden?: boolean;
}

export interface Argument {
  readonly name: string;
  readonly describe: string;
  readonly required: boolean;
}

export interface Command {
  readonly name: string;
  /** What follows the name in the first line of help: `RAW --out FOLDER [flags]`. */
  readonly usage: string;
  readonly summary: string;
  readonly arguments: readonly Argument[];
  readonly options: Readonly<Record<string, Option>>;
  readonly examples: readonly (readonly [command: string, description: string])[];
  /** More for help, such as the stages that a recipe may name. */
  readonly notes?: () => Promise<string>;
  run(flags: Flags, terminal: Terminal, signal: AbortSignal, origins: Origins): Promise<void>;
}

/** Flags that every command has. */
export const COMMON_OPTIONS: Readonly<Record<string, Option>> = {
  json: { type: "switch", describe: "one JSON document on stdout, errors included" },
  quiet: { type: "switch", describe: "no progress and no discrepancies; errors remain" },
  color: {
    type: "switch",
    describe: "colours; --no-color for none",
    byDefault: "on a terminal without NO_COLOR",
  },
  debug: { type: "switch", describe: "with an error, show where in the program it arose" },
};

/** Flags of every command that reads a raw file. */
export const READ_OPTIONS: Readonly<Record<string, Option>> = {
  group: { type: "text", value: "NAME", describe: "raw group of the file, where there are several" },
  encoding: {
    type: "whole",
    least: 0,
    value: "N",
    describe: "encoding of the header, from 0",
    byDefault: "0",
  },
};

/** Flags of every command that writes into a folder. */
export const OUTPUT_OPTIONS: Readonly<Record<string, Option>> = {
  out: {
    type: "text",
    value: "FOLDER",
    required: true,
    describe: "folder to write into; made if it is missing",
  },
  force: { type: "switch", describe: "replace files that exist" },
};

/** The recipe of every command that runs one. */
export const RECIPE_OPTIONS: Readonly<Record<string, Option>> = {
  recipe: {
    type: "text",
    value: "FILE",
    describe: "recipe to run",
    byDefault: "the one that suits the file",
  },
};

/** Flags that add stages which look across echoes. */
export const SERIES_OPTIONS: Readonly<Record<string, Option>> = {
  undisplace: {
    type: "text",
    value: "FIELD",
    describe: "put displaced pixels back: measured (from the echoes), or a .npy of Hz",
  },
  "field-coordinates": {
    type: "text",
    value: "WHERE",
    choices: ["object", "image"],
    describe: "what the pixels of a given map are: where spins are, or where they are seen",
    byDefault: "object",
  },
  separate: {
    type: "text",
    value: "WHAT",
    choices: ["fat-water"],
    describe: "maps of water and of fat, each in its place",
  },
};

/** The argument of every command that reads a raw file. */
export const RAW_ARGUMENT: Argument = {
  name: "raw",
  describe: "raw-data file in the ISMRMRD standard (HDF5)",
  required: true,
};

export function optionsOf(command: Command): Readonly<Record<string, Option>> {
  return { ...command.options, ...COMMON_OPTIONS };
}

/** The environment may give any flag as CARILLON_FLAG; a flag on the command line comes first. */
export function environmentName(option: string): string {
  return `CARILLON_${option.toUpperCase().replaceAll("-", "_")}`;
}
