import { type Command, RAW_ARGUMENT, READ_OPTIONS } from "./command.js";

/** `carillon inspect`: what a raw file holds, and where header and readouts disagree. */
export const inspect: Command = {
  name: "inspect",
  usage: "RAW [flags]",
  summary: "what a raw file holds, and where header and readouts disagree",
  arguments: [RAW_ARGUMENT],
  options: { ...READ_OPTIONS },
  examples: [
    ["inspect scan.h5", "as a table"],
    ["inspect scan.h5 --json", "for scripts"],
  ],
  async run(flags, terminal, signal) {
    const { readScan } = await import("../engine/scan.js");
    const { readoutFacts } = await import("../engine/readout-facts.js");
    const { inspectTable } = await import("./inspect-table.js");
    const file = flags.raw as string;
    const progress = (done: number, total: number) => terminal.progress("reading", done, total);
    const where = { ...(flags.group !== undefined && { group: flags.group as string }), signal, progress };
    const first = await readScan(file, {
      ...where,
      ...(flags.encoding !== undefined && { encoding: flags.encoding as number }),
    });
    const scans = [first];
    if (flags.encoding === undefined)
      for (const other of [...first.index.otherEncodings].sort((a, b) => a - b))
        scans.push(await readScan(file, { ...where, encoding: other }));
    terminal.result(scans.map(inspectTable).join("\n\n"));
    terminal.document({
      file,
      group: first.group,
      readouts: first.readouts,
      encodings: scans.map((scan) => ({ ...readoutFacts(scan), discrepancies: scan.discrepancies })),
    });
  },
};
