import { spawn } from "node:child_process";
import { existsSync, mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { fileURLToPath } from "node:url";
import { afterAll } from "vitest";

/** The command as it is built. TEST_CARILLON names another one, such as that of an installed package. */
export const BIN =
  process.env.TEST_CARILLON ?? fileURLToPath(new URL("../../dist/carillon.js", import.meta.url));

export interface Outcome {
  /** Null where a signal ended the process. */
  readonly code: number | null;
  readonly signal: NodeJS.Signals | null;
  readonly stdout: string;
  readonly stderr: string;
}

export interface RunOptions {
  readonly cwd?: string;
  /** Added to a plain environment without any CARILLON_ variable. */
  readonly env?: Readonly<Record<string, string>>;
  /** A process that takes longer is killed: `signal` is then SIGKILL. */
  readonly timeoutSeconds?: number;
  /** Send a signal once `text` has been on stderr; a further wait spreads the moments. */
  readonly interrupt?: { readonly signal: NodeJS.Signals; readonly after: string | number };
  /** Where stdout goes instead of a pipe that is read to its end. */
  readonly stdout?: number;
}

/** Run `carillon` as a user does: as a process, with stdout and stderr on pipes, and stdin on a pipe that never ends. */
export function carillon(words: readonly string[], options: RunOptions = {}): Promise<Outcome> {
  if (!existsSync(BIN)) throw new Error(`${BIN} is missing: npm run build`);
  return new Promise((resolve, reject) => {
    const child = spawn(process.execPath, [BIN, ...words], {
      cwd: options.cwd,
      env: { PATH: process.env.PATH, HOME: process.env.HOME, ...options.env },
      stdio: ["pipe", options.stdout ?? "pipe", "pipe"],
    });
    if (!child.stderr) throw new Error("stderr is a pipe"); // as stdio says; the types do not know
    let stdout = "";
    let stderr = "";
    const { interrupt } = options;
    child.stdout?.setEncoding("utf8").on("data", (text: string) => {
      stdout += text;
    });
    child.stderr.setEncoding("utf8").on("data", (text: string) => {
      stderr += text;
      if (typeof interrupt?.after === "string" && stderr.includes(interrupt.after)) signalOnce();
    });
    const signalOnce = () => {
      if (child.signalCode === null && child.exitCode === null && !signalled) {
        signalled = true;
        child.kill(interrupt!.signal);
        // An interrupted process has two seconds to go.
        setTimeout(() => child.kill("SIGKILL"), 2000).unref();
      }
    };
    let signalled = false;
    if (typeof interrupt?.after === "number") setTimeout(signalOnce, interrupt.after);
    const timeout = setTimeout(() => child.kill("SIGKILL"), 1000 * (options.timeoutSeconds ?? 30));
    child.on("error", reject);
    child.on("close", (code, signal) => {
      clearTimeout(timeout);
      resolve({ code, signal, stdout, stderr });
    });
  });
}

/** A folder of this test file's own, removed at its end. */
export function scratchFolder(name: string): string {
  const folder = mkdtempSync(path.join(tmpdir(), `carillon-${name}-`));
  afterAll(() => rmSync(folder, { recursive: true, force: true }));
  return folder;
}
