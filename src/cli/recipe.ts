import { type Command, READ_OPTIONS } from "./command.js";

/** `carillon recipe`: the recipe that `recon` would run, ready to edit. */
export const recipe: Command = {
  name: "recipe",
  usage: "[raw]",
  summary: "print the default recipe of a raw file, ready to edit",
  positionals: { raw: "raw-data file in the ISMRMRD standard (HDF5)" },
  options: {
    set: {
      type: "string",
      array: true,
      requiresArg: true,
      nargs: 1,
      describe: "stage.parameter=value, or stage=off; repeatable",
    },
    schema: { type: "boolean", default: false, describe: "print the JSON Schema of recipes instead" },
    ...READ_OPTIONS,
  },
  examples: [
    ["recipe scan.h5 > my.yaml", "then: carillon recon scan.h5 --recipe my.yaml --out result"],
    ["recipe --schema", "JSON Schema of recipes"],
  ],
  async run(flags, terminal, signal) {
    if (flags.schema) {
      const { recipeSchema } = await import("../recipe/schema.js");
      process.stdout.write(`${JSON.stringify(recipeSchema(), null, 1)}\n`);
      return;
    }
    const { UsageError } = await import("../errors.js");
    if (flags.raw === undefined)
      throw new UsageError(
        { field: "raw" },
        "no raw file given",
        "carillon recipe RAW, or carillon recipe --schema",
      );
    const { requestOf } = await import("./plan-file.js");
    const { readScan } = await import("../engine/scan.js");
    const { formatRecipe } = await import("../recipe/recipe.js");
    const request = requestOf(flags);
    const progress = (done: number, total: number) => terminal.progress("reading", done, total);
    const scan = await readScan(flags.raw as string, { overrides: request.overrides, signal, progress });
    const { recipe, reasons } = request.prepare(scan.facts);
    terminal.discrepancies(scan.discrepancies);
    terminal.result(formatRecipe(recipe, reasons).trimEnd());
    terminal.document(recipe);
  },
};
