import type { Scan } from "../engine/scan.js";
import type { Flags } from "./command.js";
import type { Terminal } from "./terminal.js";

/** The scan of a raw file, its group and encoding as the flags say. @throws InputError */
export async function scanOfFlags(
  raw: string,
  flags: Flags,
  terminal: Terminal,
  signal: AbortSignal,
): Promise<Scan> {
  const { readScan } = await import("../engine/scan.js");
  return readScan(raw, {
    overrides: {
      ...(flags.group !== undefined && { group: flags.group as string }),
      ...(flags.encoding !== undefined && { encoding: flags.encoding as number }),
    },
    signal,
    progress: (done, total) => terminal.progress("reading", done, total),
  });
}
