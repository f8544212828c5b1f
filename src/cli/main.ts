import { OutputError } from "../errors.js";
import { VERSION } from "../version.js";
import type { Command } from "./command.js";
import { COMMANDS } from "./commands.js";
import { briefHelp, commandHelp, programHelp } from "./help.js";
import { IncompleteError, type Invocation, parseCommandLine, switchSet } from "./parse.js";
import { EXIT, Terminal } from "./terminal.js";

/** How long a command that was told to stop has to clean up. */
const CLEANING_MILLISECONDS = 1200;

/** Parse the command line, run the command, and return the exit code. */
export async function main(argv: readonly string[]): Promise<number> {
  const terminal = terminalFor(argv);
  muteLibraries(terminal);
  const stray = strayFault();
  try {
    const invocation = parseCommandLine(argv, process.env, COMMANDS);
    if (invocation.kind === "run") await runCommand(invocation, terminal, stray);
    else
      process.stdout.write(`${invocation.kind === "version" ? VERSION : await help(invocation.command)}\n`);
    await Promise.race([written(process.stdout), stray]);
    return EXIT.done;
  } catch (error) {
    process.exitCode = terminal.failure(error); // at once: a closed pipe ends the process with it
    if (error instanceof IncompleteError)
      terminal.help(error.command ? briefHelp(error.command) : programHelp(COMMANDS));
    await Promise.all([written(process.stdout), written(process.stderr)]);
    // What is still under way (a library that loads, a thread that hashes), a failed command has no use for.
    process.exit();
  }
}

function help(command: Command | undefined): Promise<string> | string {
  return command ? commandHelp(command) : programHelp(COMMANDS);
}

/**
 * Run a command. An interrupt, or a fault that arises outside its flow, makes it clean up and stop; one that does not
 * stop is left to the end of the process.
 */
async function runCommand(
  { command, flags, origins }: Invocation & { readonly kind: "run" },
  terminal: Terminal,
  stray: Promise<never>,
): Promise<void> {
  const abort = new AbortController();
  const { signal } = abort;
  process.once("SIGINT", () => abort.abort());
  process.once("SIGTERM", () => abort.abort());
  let over = false;
  let timer: NodeJS.Timeout | undefined;
  const late = new Promise<never>((_, reject) => {
    signal.addEventListener("abort", () => {
      if (!over) timer = setTimeout(() => reject(signal.reason), CLEANING_MILLISECONDS);
    });
  });
  const running = command.run(flags, terminal, signal, origins).finally(() => {
    over = true;
    clearTimeout(timer);
  });
  try {
    await Promise.race([running, stray, late]);
  } catch (error) {
    if (!over) abort.abort();
    if (!over) await Promise.race([running, late]).catch(() => undefined); // the first fault is the one to report
    throw error;
  }
}

function terminalFor(argv: readonly string[]): Terminal {
  const set = (name: string) => switchSet(name, argv, process.env);
  const colorful = process.stderr.isTTY === true && !process.env.NO_COLOR;
  return new Terminal({
    quiet: set("quiet") ?? false,
    json: set("json") ?? false,
    color: set("color") ?? colorful,
    debug: set("debug") ?? false,
  });
}

/** The HDF5 library prints warnings about damaged text through the console; they are for --debug. */
function muteLibraries({ options }: Terminal): void {
  const say = (...words: unknown[]) => {
    if (options.debug) process.stderr.write(`${words.join(" ").slice(0, 300)}\n`);
  };
  Object.assign(console, { log: say, info: say, warn: say, error: say });
}

/**
 * Rejects with what nobody else hears: exceptions outside any promise, rejections that nobody awaits, streams that
 * fail. Node itself would print the source line, and with the HDF5 library that is megabytes.
 */
function strayFault(): Promise<never> {
  const fault = new Promise<never>((_, reject) => {
    process.on("uncaughtException", reject);
    process.on("unhandledRejection", reject);
    process.stdout.on("error", (error: NodeJS.ErrnoException) => {
      // `carillon inspect RAW | head` ends quietly when the reader has seen enough.
      if (error.code === "EPIPE") process.exit();
      reject(
        new OutputError({ file: "stdout" }, `could not be written (${error.code})`, "", { cause: error }),
      );
    });
    process.stderr.on("error", () => undefined); // there is no place left to say so
  });
  fault.catch(() => undefined); // only a command that runs awaits it
  return fault;
}

/** Resolves when all that was written to a stream has gone out, and a fault of it has been heard. */
function written(stream: NodeJS.WriteStream): Promise<void> {
  return new Promise((resolve) => stream.write("", () => setImmediate(resolve)));
}
