import path from "node:path";
import { UsageError } from "../errors.js";
import {
  type Command,
  type Flags,
  OUTPUT_OPTIONS,
  RAW_ARGUMENT,
  READ_OPTIONS,
  SERIES_OPTIONS,
} from "./command.js";
import { ENGINE_OPTIONS, runOptions } from "./engine-flags.js";
import { SET_OPTION, stageNotes } from "./stage-notes.js";
import type { Terminal } from "./terminal.js";
import { wrap } from "./text.js";

/** `carillon compare`: variants of a recipe side by side, theory beside measurement. */
export const compare: Command = {
  name: "compare",
  usage: "RAW --out FOLDER --vary STAGE.KEY=A,B [flags]",
  summary: "variants of a recipe side by side: resolution, ringing, noise, differences",
  arguments: [RAW_ARGUMENT],
  options: {
    ...OUTPUT_OPTIONS,
    vary: {
      type: "text",
      value: "STAGE.KEY=A,B,...",
      repeatable: true,
      describe: "values to compare; given again, all combinations",
    },
    recipe: { type: "text", value: "FILE", repeatable: true, describe: "recipes to compare, or to vary" },
    set: SET_OPTION,
    ...SERIES_OPTIONS,
    reference: {
      type: "text",
      value: "NAME",
      describe: "variant that others are measured against",
      byDefault: "the first",
    },
    image: {
      type: "whole",
      least: 0,
      value: "N",
      describe: "image that is shown, of all, from 0",
      byDefault: "a middle one",
    },
    images: {
      type: "whole",
      least: 1,
      value: "N",
      fallback: 4,
      describe: "most images that differences are measured on",
    },
    region: {
      type: "text",
      value: "SHAPE:X,Y,W,H",
      describe:
        "where signal and noise are taken: rectangle or ellipse, in mm from the centre, or in pixels with px at the end; or a mask .npy",
      byDefault: "the bright half of the object",
    },
    "noise-region": {
      type: "text",
      value: "SHAPE:X,Y,W,H",
      describe: "the same, where there is noise alone",
    },
    edge: {
      type: "text",
      value: "AXIS:LINE:PX",
      describe: "edge across x or y: row or column, and pixel along it, from 0",
      byDefault: "the straightest strong one",
    },
    "noise-by": {
      type: "text",
      value: "HOW",
      choices: ["propagation", "replicas"],
      fallback: "propagation",
      describe: "how noise is had: by theory alone, or measured over pseudo-replicas too",
    },
    replicas: { type: "whole", least: 2, value: "N", fallback: 64, describe: "how many pseudo-replicas" },
    seed: { type: "whole", least: 0, value: "N", fallback: 1, describe: "chooses the replicas' noise" },
    ...READ_OPTIONS,
    ...ENGINE_OPTIONS,
  },
  examples: [
    ["compare scan.h5 --out cmp --vary apodize.window=none,hann,tukey:0.5", "three windows"],
    ["compare scan.h5 --out c --vary prewhiten=on,off --vary apodize=on,off", "four combinations"],
    ["compare scan.h5 --out cmp --recipe a.yaml --recipe b.yaml", "two recipes"],
  ],
  notes: stageNotes,
  async run(flags, terminal, signal) {
    const { variantsOf } = await import("./compare-variants.js");
    const { variants, overrides } = variantsOf(flags);
    const settings = await settingsOf(flags);
    const { startHdf5 } = await import("../ingest/hdf5.js");
    await startHdf5();
    const { writeComparison } = await import("../engine/write-comparison.js");
    const written = await writeComparison(flags.raw as string, variants, {
      ...runOptions(flags),
      overrides,
      out: flags.out as string,
      force: flags.force === true,
      ...(flags.reference !== undefined && { reference: flags.reference as string }),
      ...(flags.image !== undefined && { image: flags.image as number }),
      mostImages: flags.images as number,
      ...(flags["noise-by"] === "replicas" && {
        replicaCount: flags.replicas as number,
        seed: flags.seed as number,
      }),
      settings,
      signal,
      progress: (done, total) => terminal.progress("comparing", done, total),
    });
    report(written, terminal);
  },
};

type Written = Awaited<ReturnType<typeof import("../engine/write-comparison.js")["writeComparison"]>>;
type SettingsOf = Parameters<
  typeof import("../engine/write-comparison.js")["writeComparison"]
>[2]["settings"];

/** Edge and regions as the flags say, laid on the reference's matrix once it is known. */
async function settingsOf(flags: Flags): Promise<SettingsOf> {
  const { defaultRegion, parseEdge, regionFrom } = await import("./compare-regions.js");
  const edge = flags.edge === undefined ? undefined : parseEdge(flags.edge as string);
  const [region, noiseRegion] = [flags.region, flags["noise-region"]] as (string | undefined)[];
  const regionOn = region === undefined ? undefined : regionFrom("--region", region);
  const noiseRegionOn = noiseRegion === undefined ? undefined : regionFrom("--noise-region", noiseRegion);
  const how = flags["noise-by"] as string;
  return (reference, shown) => ({
    ...(edge && { edge }),
    region: regionOn ? regionOn(reference) : defaultRegion(reference.images[shown]!),
    ...(noiseRegionOn && { noiseRegion: noiseRegionOn(reference) }),
    describe: [
      ["region", region ?? "pixels above half of the bright level of the reference"],
      ["edge", edge ? (flags.edge as string) : "found on the reference"],
      [
        "noise measured",
        how === "replicas"
          ? `over ${flags.replicas} pseudo-replicas, seed ${flags.seed}`
          : noiseRegion === undefined
            ? "not measured"
            : `in ${noiseRegion}`,
      ],
    ],
  });
}

function report({ files, compared, values, reference, shown, remarks }: Written, terminal: Terminal): void {
  terminal.discrepancies(compared.scan.discrepancies);
  terminal.document({
    files,
    reference,
    remarks,
    variants: compared.variants.map(({ name, seconds }, v) => ({ name, values: values[v], seconds })),
    discrepancies: compared.scan.discrepancies,
  });
  terminal.result(comparisonTable(compared.variants, values));
  const times = compared.variants.map(({ seconds }) => Number((1e3 * seconds).toPrecision(2)));
  terminal.result(wrap(`run time after the stages that all share, ms: ${times.join(", ")}`, 80, "  "));
  if (compared.places.length > 1)
    terminal.result(
      wrap(`edge, regions and pictures are of ${shown}; choose another with --image`, 80, "  "),
    );
  for (const remark of remarks) terminal.result(wrap(`note: ${remark}`, 80, "  "));
  for (const file of files) terminal.result(file);
  const { passes } = compared;
  terminal.result(
    `${compared.variants.length} variants in ${passes === 1 ? "one pass" : `${passes} passes`} over the file; ` +
      `open ${path.join(path.dirname(files[0]!), "compare.html")}`,
  );
  terminal.result("For research only, not for diagnosis or treatment.");
}

const COLUMNS = [
  ["width mm", "widthMeasuredMm"],
  ["theory", "widthTheoryMm"],
  ["over %", "overshootMeasured"],
  ["theory", "overshootTheory"],
  ["noise", "noiseMeasured"],
  ["theory", "noiseTheory"],
  ["NRMSE %", "nrmse"],
] as const;
const NAME_WIDTH = 24;

/** The main measures in 80 columns. */
function comparisonTable(variants: Written["compared"]["variants"], values: Written["values"]): string {
  const cell = (text: string) => text.padStart(8);
  const number = (value: number | null | undefined) =>
    value == null ? "-" : String(Number(value.toPrecision(3)));
  const lines = variants.map(({ name }, v) => {
    const cells = COLUMNS.map(([, id]) => cell(number(values[v]![id]))).join("");
    return name.length < NAME_WIDTH
      ? name.padEnd(NAME_WIDTH) + cells
      : `${name}\n${"".padEnd(NAME_WIDTH)}${cells}`;
  });
  return [`${"variant".padEnd(NAME_WIDTH)}${COLUMNS.map(([head]) => cell(head)).join("")}`, ...lines].join(
    "\n",
  );
}

/** Most variants in one comparison. */
export const MOST_VARIANTS = 24;

/** @throws UsageError for a grid that is too large */
export function refuseLargeGrid(count: number): void {
  if (count > MOST_VARIANTS)
    throw new UsageError(
      { field: "--vary", value: `${count} combinations` },
      `must be ${MOST_VARIANTS} or fewer`,
      "Compare fewer values at a time",
    );
}
