import { type Command, RAW_ARGUMENT, READ_OPTIONS, SERIES_OPTIONS } from "./command.js";
import { SET_OPTION, stageNotes } from "./stage-notes.js";

/** `carillon recipe`: the recipe that `recon` would run, ready to edit. */
export const recipe: Command = {
  name: "recipe",
  usage: "RAW [flags]",
  summary: "print the recipe that recon would run, ready to edit",
  arguments: [{ ...RAW_ARGUMENT, required: false }],
  options: {
    set: SET_OPTION,
    ...SERIES_OPTIONS,
    schema: { type: "switch", describe: "print the JSON Schema of recipes; needs no raw file" },
    ...READ_OPTIONS,
  },
  examples: [
    ["recipe scan.h5 > my.yaml", "then: carillon recon scan.h5 --recipe my.yaml --out result"],
    ["recipe --schema", "JSON Schema of recipes, for an editor"],
  ],
  notes: stageNotes,
  async run(flags, terminal, signal) {
    if (flags.schema) {
      const { recipeSchema } = await import("../recipe/schema.js");
      process.stdout.write(`${JSON.stringify(recipeSchema(), null, 1)}\n`);
      return;
    }
    const raw = flags.raw as string | undefined;
    if (raw === undefined) {
      const { IncompleteError } = await import("./parse.js");
      throw new IncompleteError("RAW is missing", "See: carillon recipe --help", recipe);
    }
    const { requestOf } = await import("./plan-file.js");
    const { readScan } = await import("../engine/scan.js");
    const { formatRecipe } = await import("../recipe/recipe.js");
    const request = requestOf(flags);
    const progress = (done: number, total: number) => terminal.progress("reading", done, total);
    const scan = await readScan(raw, { overrides: request.overrides, signal, progress });
    const { recipe: resolved, reasons } = request.prepare(scan.facts);
    terminal.discrepancies(scan.discrepancies);
    terminal.result(formatRecipe(resolved, reasons).trimEnd());
    terminal.document(resolved);
  },
};
