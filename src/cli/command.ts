import type { Options } from "yargs";
import { UsageError } from "../errors.js";
import { Terminal } from "./terminal.js";

/** Values of a command's flags after parsing; each command knows its own. */
export type Flags = Readonly<Record<string, unknown>>;

export interface Command {
  readonly name: string;
  /** Positional arguments as help shows them, such as `<raw>`. */
  readonly usage: string;
  readonly summary: string;
  readonly positionals: Readonly<Record<string, string>>;
  readonly options: Readonly<Record<string, Options>>;
  readonly examples: readonly (readonly [command: string, description: string])[];
  run(flags: Flags, terminal: Terminal, signal: AbortSignal): Promise<void>;
}

/** Flags that every command has. */
export const COMMON_OPTIONS: Readonly<Record<string, Options>> = {
  quiet: { type: "boolean", default: false, describe: "no progress and no discrepancies; errors remain" },
  json: { type: "boolean", default: false, describe: "one JSON document on stdout, errors included" },
  color: { type: "boolean", describe: "colours (default: on a terminal, unless NO_COLOR is set)" },
  debug: { type: "boolean", default: false, describe: "show where in the program an error arose" },
};

/** Flags of every command that reads a raw file. */
export const READ_OPTIONS: Readonly<Record<string, Options>> = {
  group: { type: "string", requiresArg: true, describe: "raw group of the file, where there are several" },
  encoding: { type: "number", requiresArg: true, describe: "encoding of the header, from 0 (default 0)" },
};

/** The environment may give any flag as CARILLON_FLAG; a flag on the command line comes first. */
export function environmentName(option: string): string {
  return `CARILLON_${option.toUpperCase().replaceAll("-", "_")}`;
}

export function terminalFor(flags: Flags): Terminal {
  const noColor = process.env.NO_COLOR !== undefined && process.env.NO_COLOR !== "";
  const color = flags.color === undefined ? !noColor && process.stderr.isTTY === true : flags.color === true;
  return new Terminal({
    quiet: flags.quiet === true,
    json: flags.json === true,
    color,
    debug: flags.debug === true,
  });
}

/** A whole number from a flag. @throws UsageError */
export function wholeNumber(flags: Flags, name: string, least: number): number | undefined {
  const value = flags[name];
  if (value === undefined) return undefined;
  if (typeof value !== "number" || !Number.isInteger(value) || value < least)
    throw new UsageError({ field: `--${name}`, value }, `must be a whole number of at least ${least}`, "");
  return value;
}
