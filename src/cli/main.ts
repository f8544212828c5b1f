import yargs, { type Options } from "yargs";
import { CarillonError, UsageError } from "../errors.js";
import { nearest } from "../stages/nearest.js";
import { VERSION } from "../version.js";
import { COMMON_OPTIONS, type Command, environmentName, type Flags, terminalFor } from "./command.js";
import { COMMANDS } from "./commands.js";
import { EXIT } from "./terminal.js";

const CAUTION = "For research only, not for diagnosis or treatment.";

/** Parse the command line, run the command, and return the exit code. */
export async function main(argv: readonly string[]): Promise<number> {
  const abort = new AbortController();
  const interrupt = () => abort.abort();
  process.once("SIGINT", interrupt);
  process.once("SIGTERM", interrupt);
  quietOnClosedPipe();
  // Errors of the command line itself must honour --json and --debug before anything is parsed.
  const plain = terminalFor({
    json: argv.includes("--json"),
    debug: argv.includes("--debug"),
    ...colorFlag(argv),
  });
  let chosen: { command: Command; flags: Flags } | undefined;
  try {
    const parser = commandLine((command, flags) => {
      chosen = { command, flags };
    });
    const help = await parsed(parser, argv);
    if (help !== undefined) {
      process.stdout.write(`${help}\n`);
      return EXIT.done;
    }
    if (!chosen) throw new UsageError({}, "no command given", "See: carillon --help");
    checkNumbers(chosen.command, chosen.flags);
    await chosen.command.run(chosen.flags, terminalFor(chosen.flags), abort.signal);
    return EXIT.done;
  } catch (error) {
    return (chosen ? terminalFor(chosen.flags) : plain).failure(error);
  }
}

function commandLine(choose: (command: Command, flags: Flags) => void) {
  let parser = yargs()
    .locale("en")
    .scriptName("carillon")
    .usage(`$0 <command>\n\nRaw MR k-space to images whose pixels can be trusted. ${CAUTION}`)
    .version(VERSION)
    .help()
    .alias("help", "h")
    .wrap(80)
    .strict()
    .recommendCommands()
    .demandCommand(1, "no command given; see: carillon --help")
    .parserConfiguration({ "duplicate-arguments-array": true, "boolean-negation": true })
    .exitProcess(false)
    .fail((message, error) => {
      throw error ?? new UsageError({}, message, "");
    });
  for (const command of COMMANDS) {
    const options: Record<string, Options> = { ...command.options, ...COMMON_OPTIONS };
    parser = parser.command({
      command: `${command.name} ${command.usage}`.trim(),
      describe: command.summary,
      builder: (inner) => {
        for (const [name, describe] of Object.entries(command.positionals))
          inner.positional(name, { type: "string", describe });
        for (const [example, describe] of command.examples) inner.example(`$0 ${example}`, describe);
        return inner.options(options).check((flags) => checkRepeats(flags, options));
      },
      handler: (flags) => choose(command, withEnvironment(flags, options)),
    });
  }
  return parser;
}

/** Resolves to the text of --help or --version, or undefined where a command was chosen. */
async function parsed(
  parser: ReturnType<typeof commandLine>,
  argv: readonly string[],
): Promise<string | undefined> {
  let output: string | undefined;
  let failure: unknown;
  await parser.parseAsync([...argv], {}, (error: unknown, _flags: unknown, text: string) => {
    failure = error ?? undefined;
    if (text) output = text;
  });
  if (failure) throw clearer(failure);
  return output;
}

/** Errors of the parser become ours, with a suggestion where a flag is mistyped. */
function clearer(error: unknown): unknown {
  if (error instanceof CarillonError && !/^Unknown argument/.test(error.rule)) return error;
  const text = error instanceof Error ? error.message : String(error);
  const unknown = /Unknown arguments?: (.*?)\.?$/.exec(text)?.[1]?.split(", ")[0];
  if (unknown === undefined)
    return error instanceof CarillonError ? error : new UsageError({}, text.split("\n")[0]!, "");
  const known = [
    ...new Set([...COMMANDS.flatMap(({ options }) => Object.keys(options)), ...Object.keys(COMMON_OPTIONS)]),
  ];
  const guess = nearest(unknown, known);
  const flag = unknown.length === 1 ? `-${unknown}` : `--${unknown}`;
  return new UsageError(
    { field: flag },
    "no such flag or argument",
    guess ? `Did you mean --${guess}?` : "See --help of the command",
  );
}

function checkRepeats(flags: Flags, options: Readonly<Record<string, Options>>): true {
  for (const [name, value] of Object.entries(flags))
    if (Array.isArray(value) && options[name] && !options[name].array)
      throw new UsageError(
        { field: `--${name}`, value: value.join(", ") },
        "is given more than once",
        "Give it once",
      );
  return true;
}

function checkNumbers(command: Command, flags: Flags): void {
  for (const [name, { type }] of Object.entries(command.options)) {
    const values = [flags[name]].flat();
    if (type === "number" && values.some((value) => value !== undefined && !Number.isFinite(value)))
      throw new UsageError({ field: `--${name}` }, "must be a number", "");
  }
}

/** Flags that the command line does not give, from CARILLON_... variables; other variables are not looked at. */
function withEnvironment(flags: Flags, options: Readonly<Record<string, Options>>): Flags {
  const merged: Record<string, unknown> = { ...flags };
  for (const [name, { type, array, default: fallback }] of Object.entries(options)) {
    const text = process.env[environmentName(name)];
    if (text === undefined || text === "" || (flags[name] !== undefined && flags[name] !== fallback))
      continue;
    const value =
      type === "number" ? Number(text) : type === "boolean" ? !/^(0|false|no|off)$/i.test(text) : text;
    if (type === "number" && !Number.isFinite(value as number))
      throw new UsageError({ field: environmentName(name), value: text }, "must be a number", "");
    merged[name] = array ? text.split(",") : value;
  }
  return merged;
}

function colorFlag(argv: readonly string[]): Flags {
  return argv.includes("--no-color") ? { color: false } : {};
}

/** `carillon inspect RAW | head` ends quietly when the reader has seen enough. */
function quietOnClosedPipe(): void {
  process.stdout.on("error", (error: NodeJS.ErrnoException) => {
    if (error.code === "EPIPE") process.exit(process.exitCode ?? 0);
    throw error;
  });
}
