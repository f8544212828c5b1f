import { SAVES, type Save } from "../engine/products.js";
import {
  type Command,
  type Flags,
  type Origins,
  RAW_ARGUMENT,
  READ_OPTIONS,
  RECIPE_OPTIONS,
  SERIES_OPTIONS,
} from "./command.js";
import { ENGINE_OPTIONS, runOptions, TIMINGS_OPTION } from "./engine-flags.js";
import type { Request } from "./plan-file.js";
import { report } from "./report.js";
import { SET_OPTION, stageNotes } from "./stage-notes.js";
import type { Terminal } from "./terminal.js";

/** `carillon recon`: from a raw file to arrays, pictures and a sidecar. */
export const recon: Command = {
  name: "recon",
  usage: "RAW --out FOLDER [flags]",
  summary: "reconstruct a raw file: arrays, pictures, sidecar",
  arguments: [RAW_ARGUMENT],
  options: {
    out: { type: "text", value: "FOLDER", describe: "folder to write into; made if it is missing" },
    force: { type: "switch", describe: "replace files that exist" },
    save: { type: "text", value: "WHAT", choices: SAVES, repeatable: true, describe: "also write" },
    ...RECIPE_OPTIONS,
    set: SET_OPTION,
    ...SERIES_OPTIONS,
    explain: { type: "switch", describe: "print the plan and stop; needs no --out" },
    strict: { type: "switch", describe: "fail where header and readouts disagree or lines are missing" },
    "grey-low": { type: "number", value: "V", describe: "value shown black in image.png" },
    "grey-high": { type: "number", value: "V", describe: "value shown white in image.png" },
    ...READ_OPTIONS,
    ...ENGINE_OPTIONS,
    timings: TIMINGS_OPTION,
  },
  examples: [
    ["recon scan.h5 --out result", "image.npy, image.png and image.json in result/"],
    ["recon scan.h5 --out hann --set apodize.window=hann", "the same with a Hann window"],
    [
      "recon scan.h5 --out straight --undisplace measured",
      "put back what the field displaced, measured from the echoes",
    ],
    ["recon scan.h5 --out parts --separate fat-water", "water.npy and fat.npy in their true places"],
    ["recon scan.h5 --explain", "what would be done, and why"],
  ],
  notes: stageNotes,
  async run(flags, terminal, signal, origins) {
    const { requestOf } = await import("./plan-file.js");
    const { UsageError } = await import("../errors.js");
    const out = flags.out as string | undefined;
    if (!flags.explain && out === undefined)
      throw new UsageError({ field: "--out" }, "no folder to write into", "Give one: --out FOLDER");
    const request = requestOf(flags);
    if (flags.explain) return explainOnly(flags, origins, request, terminal, signal);
    // Only now is nothing wrong with the flags. The library compiles while the rest loads.
    const { startHdf5 } = await import("../ingest/hdf5.js");
    await startHdf5();
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
    report(written, flags, terminal);
  },
};

async function explainOnly(
  flags: Flags,
  origins: Origins,
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
  terminal.result(explain(scan, plan, request.source, flags, origins));
  terminal.document({
    settings: Object.fromEntries(
      Object.entries(origins).map(([name, from]) => [name, { value: flags[name] ?? null, from }]),
    ),
    plan: plan.stages.map(({ stage, ...rest }) => ({ id: stage.id, ...rest })),
    recipe,
    outputs,
  });
}
