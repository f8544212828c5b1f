import { CarillonError } from "../errors.js";
import type { Discrepancy } from "../physics/scan.js";
import { wrap } from "./text.js";

/** Exit codes of every command (DEVELOPERS.md). */
export const EXIT = {
  done: 0,
  fault: 1,
  usage: 2,
  input: 3,
  partly: 4,
  output: 5,
  interrupted: 130,
} as const;

export interface TerminalOptions {
  readonly quiet: boolean;
  readonly json: boolean;
  readonly color: boolean;
  readonly debug: boolean;
}

/** Everything a command says: results to stdout, the rest to stderr; escape bytes and carriage returns only on a terminal. */
export class Terminal {
  #bar = false;
  #lastPercent = 0;

  constructor(readonly options: TerminalOptions) {}

  /** A result, for people; `--json` prints the document instead. */
  result(text: string): void {
    if (!this.options.json) process.stdout.write(`${printable(text)}\n`);
  }

  /** The one document of `--json`. */
  document(value: unknown): void {
    if (this.options.json) process.stdout.write(`${JSON.stringify(value, null, 1)}\n`);
  }

  /** A message that is no result. */
  message(text: string): void {
    if (this.options.quiet) return;
    this.#clearBar();
    process.stderr.write(`${text}\n`);
  }

  discrepancies(found: readonly Discrepancy[]): void {
    for (const { severity, message } of found) {
      const mark = severity === "problem" ? this.#paint("33", "discrepancy") : "note";
      this.message(wrap(`${mark}: ${printable(message)}`, 80, "  "));
    }
  }

  /** A bar on a terminal, a line at every quarter elsewhere. */
  progress(label: string, done: number, total: number): void {
    if (this.options.quiet) return;
    const percent = Math.floor((100 * done) / total);
    if (percent === this.#lastPercent) return;
    if (process.stderr.isTTY) {
      const full = Math.floor((30 * done) / total);
      process.stderr.write(`\r${label} [${"=".repeat(full)}${" ".repeat(30 - full)}] ${percent} %`);
      this.#bar = true;
    } else if (Math.floor(percent / 25) > Math.floor(this.#lastPercent / 25)) {
      process.stderr.write(`${label} ${percent} %\n`);
    }
    this.#lastPercent = percent;
    if (done === total) {
      this.#clearBar();
      this.#lastPercent = 0;
    }
  }

  /** What somebody needs whose command line is incomplete. */
  help(text: string): void {
    if (!this.options.json) process.stderr.write(`\n${text}\n`);
  }

  /** Say what went wrong, in one line (that a terminal breaks between words), and return the exit code. */
  failure(error: unknown): number {
    this.#clearBar();
    const known = error instanceof CarillonError;
    const interrupted = error instanceof Error && error.name === "AbortError";
    const exitCode = known ? error.exitCode : interrupted ? EXIT.interrupted : EXIT.fault;
    const message = interrupted ? "interrupted; nothing was written" : firstLine(error);
    if (this.options.json) {
      const place = known ? { ...error.place, rule: error.rule, mend: error.mend } : {};
      this.document({ error: { message, exitCode, ...place } });
    } else {
      const prefix = known || interrupted ? "" : "a fault of this program: ";
      const line = `${this.#paint("31", "error")}: ${prefix}${message}`;
      process.stderr.write(`${process.stderr.isTTY ? wrap(line, 80, "  ") : line}\n`);
      if (!known && !interrupted && !this.options.debug)
        process.stderr.write("Run again with --debug to see where.\n");
    }
    if (this.options.debug) process.stderr.write(`${printable(stackOf(error))}\n`);
    return exitCode;
  }

  #clearBar(): void {
    if (!this.#bar) return;
    process.stderr.write(`\r${" ".repeat(76)}\r`);
    this.#bar = false;
  }

  #paint(code: string, text: string): string {
    return this.options.color ? `\u001b[${code}m${text}\u001b[0m` : text;
  }
}

/** Where an error arose, and the one behind it; bounded, because those of the HDF5 library can be pages. */
function stackOf(error: unknown): string {
  if (!(error instanceof Error)) return String(error).slice(0, 4000);
  const own = (error.stack ?? error.message).slice(0, 4000);
  return error.cause === undefined ? own : `${own}\ncaused by: ${stackOf(error.cause)}`;
}

/** Uncaught errors of the HDF5 library print pages: one line, and not a long one. */
function firstLine(error: unknown): string {
  const text = error instanceof Error ? error.message : String(error);
  const line = printable(text.split("\n", 1)[0] ?? "");
  return line.length > LONGEST_MESSAGE ? `${line.slice(0, LONGEST_MESSAGE - 3)}...` : line;
}

const LONGEST_MESSAGE = 500;

/** Names and header text come from files of others: what would command the terminal is shown as a question mark. */
function printable(text: string): string {
  // biome-ignore lint/suspicious/noControlCharactersInRegex: control characters are what must not get through
  return text.replace(/[\u0000-\u0009\u000b-\u001f\u007f-\u009f]/g, "?");
}
