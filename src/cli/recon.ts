import { SAVES } from "../engine/products.js";
import type { Command, Flags } from "./command.js";
import { READ_OPTIONS, wholeNumber } from "./command.js";
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
    block: { type: "number", requiresArg: true, hidden: true, describe: "readouts read at a time" },
    ...READ_OPTIONS,
  },
  examples: [
    ["recon scan.h5 --out result", "image.npy, image.png and image.json in result/"],
    ["recon scan.h5 --out result --set apodize.window=hann", "the same with a Hann window"],
    ["recon scan.h5 --explain", "what would be done, and why"],
  ],
  async run(flags, terminal, signal) {
    const { planFile } = await import("./plan-file.js");
    const { UsageError } = await import("../errors.js");
    const out = flags.out as string | undefined;
    if (!flags.explain && out === undefined)
      throw new UsageError({ field: "--out" }, "no folder to write into", "Give one: --out FOLDER");
    const planned = await planFile(flags, terminal, signal);
    const { scan, plan, recipe, outputs } = planned;
    if (flags.explain) {
      const { explain } = await import("./explain.js");
      terminal.result(explain(scan, plan, planned.source));
      terminal.document({
        plan: plan.stages.map(({ stage, ...rest }) => ({ id: stage.id, ...rest })),
        recipe,
        outputs,
      });
      terminal.discrepancies(scan.discrepancies);
      return;
    }
    terminal.discrepancies(scan.discrepancies);
    failIfStrict(flags, planned);
    const { writeReconstruction } = await import("../engine/write-reconstruction.js");
    const { createKernels } = await import("../kernels/create-kernels.js");
    const blockRows = wholeNumber(flags, "block", 1);
    const written = await writeReconstruction(scan, plan, {
      out: out!,
      recipe,
      outputs,
      kernels: createKernels(),
      save: (flags.save as (typeof SAVES)[number][] | undefined) ?? [],
      force: flags.force === true,
      signal,
      progress: (done, total) => terminal.progress("reconstructing", done, total),
      ...(blockRows !== undefined && { blockRows }),
    });
    report(written, terminal);
  },
};

type Planned = Awaited<ReturnType<typeof import("./plan-file.js")["planFile"]>>;
type Written = Awaited<ReturnType<typeof import("../engine/write-reconstruction.js")["writeReconstruction"]>>;

function failIfStrict(flags: Flags, { scan, strictError }: Planned): void {
  const problem = scan.discrepancies.find(({ severity }) => severity === "problem");
  if (flags.strict && problem) throw strictError(problem);
}

function report(written: Written, terminal: Terminal): void {
  const { files, arrays, facts, discrepancies } = written;
  terminal.document({ files, arrays, scan: facts, discrepancies });
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
