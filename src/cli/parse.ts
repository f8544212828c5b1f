import { parseArgs } from "node:util";
import { UsageError } from "../errors.js";
import { nearest } from "../stages/nearest.js";
import {
  COMMON_OPTIONS,
  type Command,
  environmentName,
  type Flags,
  type Option,
  type Origins,
  optionsOf,
} from "./command.js";
import { listed } from "./text.js";

/** A command line that lacks what the command cannot do without: help is what it needs. */
export class IncompleteError extends UsageError {
  constructor(
    rule: string,
    mend: string,
    readonly command: Command | undefined,
  ) {
    super({}, rule, mend);
  }
}

/** What a command line asks for. */
export type Invocation =
  | { readonly kind: "version" }
  | { readonly kind: "help"; readonly command: Command | undefined }
  | { readonly kind: "run"; readonly command: Command; readonly flags: Flags; readonly origins: Origins };

type Environment = Readonly<Record<string, string | undefined>>;

/**
 * Read a command line: the first word is the command, the rest its arguments and flags in any order.
 * A flag comes before the environment, the environment before the default.
 * @throws UsageError naming the flag, what is wrong with it, and what may have been meant
 */
export function parseCommandLine(
  argv: readonly string[],
  environment: Environment,
  commands: readonly Command[],
): Invocation {
  const end = argv.indexOf("--");
  const words = end < 0 ? argv : argv.slice(0, end);
  const help = words.includes("--help") || words.includes("-h");
  const at = argv.findIndex((word) => !word.startsWith("-"));
  const name = argv[at];
  if (!help && words.includes("--version")) return { kind: "version" };
  if (name === undefined) {
    if (help) return { kind: "help", command: undefined };
    const known = [...Object.keys(COMMON_OPTIONS), "help", "version"];
    const stray = argv.find((word) => !known.includes(word.slice(2)));
    if (stray !== undefined) throw unknownFlag(stray, undefined, commands);
    throw new IncompleteError("no command given", "See: carillon --help", undefined);
  }
  if (name === "help") {
    const topic = argv.slice(at + 1).find((word) => !word.startsWith("-"));
    return { kind: "help", command: topic === undefined ? undefined : commandNamed(topic, commands) };
  }
  const command = commandNamed(name, commands);
  if (help) return { kind: "help", command };
  const rest = [...argv.slice(0, at), ...argv.slice(at + 1)];
  return { kind: "run", command, ...readFlags(command, rest, environment, commands) };
}

/**
 * A common switch, before anything is checked: errors of the command line itself honour --json and --debug.
 * Undefined where neither a flag nor the environment sets it.
 */
export function switchSet(
  name: string,
  argv: readonly string[],
  environment: Environment,
): boolean | undefined {
  for (const word of argv) {
    if (word === "--") break;
    if (word === `--no-${name}`) return false;
    if (word === `--${name}`) return true;
    if (word.startsWith(`--${name}=`)) return YES.test(word.slice(name.length + 3));
  }
  const text = environment[environmentName(name)];
  return text ? YES.test(text) : undefined;
}

function commandNamed(name: string, commands: readonly Command[]): Command {
  const command = commands.find((each) => each.name === name);
  if (command) return command;
  const names = commands.map((each) => each.name);
  const guess = nearest(name, names);
  throw new UsageError(
    { field: name },
    "no such command",
    guess ? `Did you mean ${guess}?` : `Commands: ${names.join(", ")}`,
  );
}

function readFlags(
  command: Command,
  words: readonly string[],
  environment: Environment,
  commands: readonly Command[],
): { flags: Flags; origins: Origins } {
  const options = optionsOf(command);
  const flags: Record<string, unknown> = {};
  const origins: Record<string, string> = {};
  const strays: string[] = [];
  for (const token of tokensOf(words, options)) {
    if (token.kind === "positional") strays.push(token.value);
    if (token.kind !== "option") continue;
    const word = words[token.index]!; // tokens carry the index of the word that they come from
    const [name, off] = token.name.startsWith("no-") ? [token.name.slice(3), true] : [token.name, false];
    const option = Object.hasOwn(options, name) ? options[name] : undefined;
    const offValue = off && (option?.type !== "switch" || token.value !== undefined);
    if (!option || offValue || !word.startsWith("--")) throw unknownFlag(word, command, commands);
    const value = off ? false : flagValue(option, `--${name}`, token.value, token.inlineValue === true);
    if (origins[name] && !option.repeatable)
      throw new UsageError({ field: `--${name}` }, "is given more than once", "Give it once");
    flags[name] = option.repeatable ? [...((flags[name] as unknown[] | undefined) ?? []), value] : value;
    origins[name] = "flag";
  }
  Object.assign(flags, readArguments(command, strays));
  complete(command, flags, origins, environment);
  return { flags, origins };
}

/** Fill in what the command line leaves open: from the environment, else the default. */
function complete(
  command: Command,
  flags: Record<string, unknown>,
  origins: Record<string, string>,
  environment: Environment,
): void {
  for (const [name, option] of Object.entries(optionsOf(command))) {
    if (origins[name]) continue;
    const variable = environmentName(name);
    const text = environment[variable]?.trim();
    if (text) {
      const values = (option.repeatable ? text.split(/\s+/) : [text]).map((part) =>
        parseValue(option, variable, part),
      );
      flags[name] = option.repeatable ? values : values[0];
      origins[name] = variable;
    } else {
      // Whether there is colour depends on the terminal, so that switch has no default.
      const fallback = option.fallback ?? (option.type === "switch" && name !== "color" ? false : undefined);
      if (fallback !== undefined) flags[name] = fallback;
      origins[name] = "default";
    }
    if (option.required && flags[name] === undefined) throw missing(`--${name} ${option.value}`, command);
  }
}

function tokensOf(words: readonly string[], options: Readonly<Record<string, Option>>) {
  return parseArgs({
    args: [...words],
    options: Object.fromEntries(
      Object.entries(options).map(([name, { type }]) => [
        name,
        { type: type === "switch" ? "boolean" : "string" } as const,
      ]),
    ),
    strict: false,
    tokens: true,
    allowPositionals: true,
  }).tokens;
}

function readArguments(command: Command, words: readonly string[]): Flags {
  const tooMany = words[command.arguments.length];
  if (tooMany !== undefined)
    throw new UsageError(
      { field: tooMany },
      "is one argument too many",
      `Usage: carillon ${command.name} ${command.usage}`,
    );
  const values: Record<string, string> = {};
  for (const [i, { name, required }] of command.arguments.entries()) {
    const word = words[i];
    if (word === "") throw new UsageError({ field: name, value: word }, "must not be empty", "Give a path");
    if (word !== undefined) values[name] = word;
    else if (required) throw missing(name.toUpperCase(), command);
  }
  return values;
}

function missing(what: string, command: Command): IncompleteError {
  return new IncompleteError(`${what} is missing`, `See: carillon ${command.name} --help`, command);
}

/** @param inline whether the value stands behind an equals sign */
function flagValue(option: Option, flag: string, text: string | undefined, inline: boolean): unknown {
  if (option.type === "switch") return text === undefined ? true : parseValue(option, flag, text);
  // A word that starts with a minus sign is the next flag, unless a number follows.
  if (text === undefined || (!inline && /^-(?![\d.])/.test(text)))
    throw new UsageError(
      { field: flag },
      "needs a value",
      `Write ${flag} ${option.value ?? "VALUE"}; one that starts with a minus sign as ${flag}=VALUE`,
    );
  return parseValue(option, flag, text);
}

const YES = /^(1|true|yes|on)$/i;
const NO = /^(0|false|no|off)$/i;
const NUMBER = /^[+-]?(\d+\.?\d*|\.\d+)(e[+-]?\d+)?$/i;

/** The value of a flag or variable from its text. @param label how errors name it */
function parseValue(option: Option, label: string, text: string): string | number | boolean {
  const fail = (rule: string, mend = "") => new UsageError({ field: label, value: text }, rule, mend);
  if (option.type === "switch") {
    if (YES.test(text)) return true;
    if (NO.test(text)) return false;
    throw fail("must be one of 1, true, yes, on, 0, false, no, off");
  }
  if (text === "") throw fail("must not be empty", `Write ${label}=${option.value ?? "VALUE"}`);
  if (option.choices && !option.choices.includes(text)) {
    const guess = nearest(text, option.choices);
    throw fail(`must be one of ${option.choices.join(", ")}`, guess ? `Did you mean ${guess}?` : "");
  }
  if (option.type === "text") return text;
  const value = NUMBER.test(text) ? Number(text) : Number.NaN;
  if (option.type === "number") {
    const items = text.split(",");
    const each = option.repeatable && items.every((item) => NUMBER.test(item.trim()));
    if (!Number.isFinite(value))
      throw fail(
        "must be a number",
        !each
          ? ""
          : label.startsWith("--")
            ? `Repeat the flag: ${items.map((item) => `${label} ${item.trim()}`).join(" ")}`
            : "Put spaces between the numbers",
      );
    return value;
  }
  const least = option.least ?? 0;
  if (!Number.isSafeInteger(value) || value < least)
    throw fail(`must be a whole number of at least ${least}`);
  return value;
}

/** @param word the flag as it was written */
function unknownFlag(word: string, command: Command | undefined, commands: readonly Command[]): UsageError {
  const flag = word.split("=", 1)[0]!;
  const name = flag.replace(/^-+/, "");
  const see = command ? `carillon ${command.name} --help` : "carillon --help";
  const known = Object.keys(command ? optionsOf(command) : COMMON_OPTIONS).concat("help", "version");
  const guess = nearest(name.toLowerCase().replaceAll("_", "-").replace(/^no-/, ""), known);
  const others = commands.filter((other) => Object.hasOwn(other.options, name)).map((other) => other.name);
  const mend = others.length
    ? `It is a flag of ${listed(others)}. See: ${see}`
    : guess
      ? `Did you mean --${guess}?`
      : `See: ${see}`;
  return new UsageError({ field: flag }, "no such flag", mend);
}
