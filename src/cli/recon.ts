import { SAVES, type Save } from "../engine/products.js";
import type { Command, Flags } from "./command.js";
import { READ_OPTIONS, wholeNumber } from "./command.js";
import type { Request } from "./plan-file.js";
import type { Terminal } from "./terminal.js";

/** `carillon recon`: from a raw file to arrays, pictures and a sidecar. */
export const recon: Command = {
  name: "recon",
  usage: "<raw>",
  summary: "reconstruct a raw file: arrays, pictures, sidecar",
  positionals: { raw: "raw-data file in the ISMRMRD standard (HDF5)" },
  options: {
    out: { type: "string", requiresArg: true, describe: "folder to write into; made if it is missing" },
    recipe: {
      type: "string",
      requiresArg: true,
      describe: "recipe to run (default: the one that suits the file)",
    },
    set: {
      type: "string",
      array: true,
      requiresArg: true,
      nargs: 1,
      describe: "stage.parameter=value, or stage=off; repeatable",
    },
    save: {
      choices: SAVES,
      array: true,
      requiresArg: true,
      nargs: 1,
      describe: "also write this; repeatable",
    },
    "grey-low": { type: "number", requiresArg: true, describe: "value shown black in image.png" },
    "grey-high": { type: "number", requiresArg: true, describe: "value shown white in image.png" },
    explain: { type: "boolean", default: false, describe: "print the plan and stop" },
    strict: {
      type: "boolean",
      default: false,
      describe: "fail where header and readouts disagree or lines are missing",
    },
    force: { type: "boolean", default: false, describe: "replace files that exist" },
    workers: { type: "number", requiresArg: true, describe: "threads that compute (default: the cores)" },
    memory: {
      type: "number",
      requiresArg: true,
      describe: "most memory for samples, MB (default: a quarter of the machine's)",
    },
    transform: {
      choices: ["simd", "plain"],
      describe: "transform engine (default: simd where the machine has it)",
    },
    timings: { type: "boolean", default: false, describe: "print the time by stage" },
    block: { type: "number", requiresArg: true, hidden: true, describe: "readouts read at a time" },
    ...READ_OPTIONS,
  },
  examples: [
    ["recon scan.h5 --out result", "image.npy, image.png and image.json in result/"],
    ["recon scan.h5 --out result --set apodize.window=hann", "the same with a Hann window"],
    ["recon scan.h5 --explain", "what would be done, and why"],
  ],
  async run(flags, terminal, signal) {
    const { requestOf } = await import("./plan-file.js");
    // The library compiles while the rest loads; what goes wrong there is heard when the file is opened.
    const { loadHdf5 } = await import("../ingest/hdf5.js");
    loadHdf5().catch(() => undefined);
    const { UsageError } = await import("../errors.js");
    const out = flags.out as string | undefined;
    if (!flags.explain && out === undefined)
      throw new UsageError({ field: "--out" }, "no folder to write into", "Give one: --out FOLDER");
    const request = requestOf(flags);
    if (flags.explain) return explainOnly(flags, request, terminal, signal);
    const { writeReconstruction } = await import("../engine/write-reconstruction.js");
    const written = await writeReconstruction(flags.raw as string, request.prepare, {
      ...runOptions(flags),
      overrides: request.overrides,
      out: out!,
      save: (flags.save as Save[] | undefined) ?? [],
      force: flags.force === true,
      strict: flags.strict === true,
      signal,
      progress: (done, total) => terminal.progress("reconstructing", done, total),
    });
    terminal.discrepancies(written.discrepancies);
    report(written, terminal);
    if (flags.timings) terminal.result(timingTable(written.timings));
  },
};

type Written = Awaited<ReturnType<typeof import("../engine/write-reconstruction.js")["writeReconstruction"]>>;

async function explainOnly(
  flags: Flags,
  request: Request,
  terminal: Terminal,
  signal: AbortSignal,
): Promise<void> {
  const { readScan } = await import("../engine/scan.js");
  const { explain } = await import("./explain.js");
  const progress = (done: number, total: number) => terminal.progress("reading", done, total);
  const scan = await readScan(flags.raw as string, { overrides: request.overrides, signal, progress });
  const { plan, recipe, outputs } = request.prepare(scan.facts);
  terminal.discrepancies(scan.discrepancies);
  terminal.result(explain(scan, plan, request.source));
  terminal.document({
    plan: plan.stages.map(({ stage, ...rest }) => ({ id: stage.id, ...rest })),
    recipe,
    outputs,
  });
}

function runOptions(flags: Flags) {
  const blockRows = wholeNumber(flags, "block", 1);
  const workers = wholeNumber(flags, "workers", 1);
  const memoryMb = wholeNumber(flags, "memory", 1);
  const transform = flags.transform as "simd" | "plain" | undefined;
  return {
    ...(blockRows !== undefined && { blockRows }),
    ...(workers !== undefined && { workers }),
    ...(memoryMb !== undefined && { memoryBytes: memoryMb * 1e6 }),
    ...(transform !== undefined && { transform }),
  };
}

/** Seconds by part, the largest first; parts of several threads add up, so the sum can exceed the time that passed. */
function timingTable(timings: Written["timings"]): string {
  const rows = Object.entries(timings).sort(([, a], [, b]) => b - a);
  return [
    "seconds by part, over all threads:",
    ...rows.map(([part, s]) => `  ${part.padEnd(20)}${s.toFixed(3)}`),
  ].join("\n");
}

function report(written: Written, terminal: Terminal): void {
  const { files, arrays, facts, discrepancies, transform, timings } = written;
  terminal.document({ files, arrays, scan: facts, discrepancies, transform, timings });
  for (const file of files) {
    const array = arrays.find((entry) => file.endsWith(`/${entry.file}`) || file === entry.file);
    terminal.result(array ? `${file}  [${array.axes.join(", ")}] = ${array.shape.join(" x ")}` : file);
  }
  const { fatWaterShift: fat, bandwidthPerPixelHz: perPixel } = facts;
  const missing = facts.lines.missing
    ? `, ${facts.lines.missing} of ${facts.lines.expected} lines missing (zero)`
    : "";
  terminal.result(
    `${facts.channels} channel(s), ${facts.slices} slice(s), ${facts.echoes} echo(es)${missing}`,
  );
  terminal.result(
    `${perPixel.toPrecision(4)} Hz per pixel: fat lies ${fat.pixels.toFixed(2)} px (${fat.mm.toFixed(2)} mm) from water along x`,
  );
  const problems = discrepancies.filter(({ severity }) => severity === "problem").length;
  if (problems) terminal.result(`${problems} discrepancies; see the sidecar`);
  terminal.result("For research only, not for diagnosis or treatment.");
}
