import path from "node:path";
import { UsageError } from "../errors.js";
import { formatRecipe } from "../recipe/recipe.js";
import { VERSION } from "../version.js";
import { chartPng, chartSvg } from "../writers/chart.js";
import { csvText } from "../writers/csv.js";
import { npyBytes } from "../writers/npy.js";
import type { FileHashes } from "../writers/output-file.js";
import { OutputSet } from "../writers/output-set.js";
import {
  type Compared,
  type CompareOptions,
  reconstructVariants,
  type Variant,
  type VariantImages,
} from "./compare.js";
import { MEASURES, type Measured, measureVariants } from "./compare-measures.js";
import {
  type ComparisonParts,
  commonRange,
  type DescribedSettings,
  differencesPicture,
  edgeChart,
  imagesPicture,
  noiseMaps,
  noisePicture,
  pageOf,
  placeLabel,
  spreadChart,
} from "./comparison-pictures.js";
import { Hasher } from "./hasher.js";
import { CAUTION } from "./sidecar.js";

export interface ComparisonOptions extends CompareOptions {
  readonly out: string;
  readonly force?: boolean;
  /** Name of the variant that others are measured against; the first if left out. */
  readonly reference?: string;
  /** Edge and regions, once the reference's matrix is known. */
  settings(reference: VariantImages, shown: number): DescribedSettings;
}

export interface WrittenComparison extends Measured {
  readonly files: readonly string[];
  readonly compared: Compared;
  readonly reference: string;
  /** Which image of the file edge, regions and pictures are of. */
  readonly shown: string;
}

const NAMES = [
  "compare.csv",
  "images.png",
  "differences.png",
  "noise.npy",
  "noise.png",
  "edge-profiles.svg",
  "edge-profiles.png",
  "point-spreads.svg",
  "point-spreads.png",
  "compare.html",
] as const;

/** Version of compare.json. */
const COMPARISON_VERSION = 1;

/**
 * Compare variants of a recipe on a file and write tables, pictures and a page into a folder: all, or none.
 * @throws UsageError, InputError, OutputError
 */
export async function writeComparison(
  file: string,
  variants: readonly Variant[],
  options: ComparisonOptions,
): Promise<WrittenComparison> {
  const referenceName = options.reference ?? variants[0]!.name;
  if (!variants.some(({ name }) => name === referenceName))
    throw new UsageError(
      { field: "--reference", value: referenceName },
      "is none of the variants",
      `Choose one of ${variants.map(({ name }) => name).join("; ")}`,
    );
  const hasher = new Hasher(file);
  const set = new OutputSet({
    folder: options.out,
    names: NAMES,
    sidecar: "compare.json",
    force: options.force ?? false,
  });
  try {
    const hashing = hasher.hash(file);
    hashing.catch(() => undefined); // awaited below; until then a fault of the reconstruction comes first
    const compared = await reconstructVariants(file, variants, options);
    const reference = compared.variants.find(({ name }) => name === referenceName)!;
    const settings = options.settings(reference, compared.shown);
    const measured = measureVariants(
      compared.variants,
      reference,
      compared.shown,
      settings,
      compared.scan.facts,
    );
    const input = await hashing;
    writeAll(set, { file, compared, reference, measured, settings, input });
    const outputs = await set.seal();
    set.commit(
      `${JSON.stringify({ ...document(file, compared, reference, measured, settings, input), outputs }, null, 1)}\n`,
    );
    return {
      ...measured,
      files: [...NAMES, "compare.json"].map((name) => path.join(options.out, name)),
      compared,
      reference: referenceName,
      shown: placeLabel(compared, reference),
    };
  } catch (error) {
    set.abort();
    throw error;
  } finally {
    hasher.dismiss();
  }
}

/** What compare.json holds. `runSeconds` alone differs from run to run. */
function document(
  file: string,
  { scan, variants, places, shown, imagesInAll, passes }: Compared,
  reference: VariantImages,
  measured: Measured,
  settings: DescribedSettings,
  input: FileHashes,
) {
  return {
    comparison: COMPARISON_VERSION,
    program: "carillon",
    version: VERSION,
    caution: CAUTION,
    input: { file: path.basename(file), bytes: input.bytes, sha256: input.sha256 },
    reference: reference.name,
    images: { measured: places, shown: places[shown], inAll: imagesInAll },
    passesOverTheFile: passes,
    settings: Object.fromEntries(settings.describe),
    edge: measured.edge ?? null,
    remarks: measured.remarks,
    discrepancies: scan.discrepancies,
    columns: MEASURES,
    arrays: [
      {
        file: "noise.npy",
        axes: ["variant", "y", "x"],
        describe:
          "standard deviation of the noise of the shown image, measured where it was, else propagated",
      },
    ],
    variants: variants.map(({ name, recipe, plan, noise }, v) => ({
      name,
      values: measured.values[v],
      noise: { whitened: noise.whitened, gain: noise.gain },
      shape: plan.result.shape,
      recipe,
      recipeText: formatRecipe(recipe),
    })),
    runSeconds: Object.fromEntries(variants.map(({ name, seconds }) => [name, seconds])),
  };
}

function writeAll(set: OutputSet, parts: ComparisonParts): void {
  const { compared, measured } = parts;
  const { variants, shown } = compared;
  const range = commonRange(variants, shown);
  set.write(
    "compare.csv",
    csvText(variants.map(({ name }, v) => ({ variant: name, ...measured.values[v] }))),
  );
  const images = imagesPicture(parts, range);
  set.write("images.png", images.png, images.picture.pixels);
  const differences = differencesPicture(parts);
  set.write("differences.png", differences.png, differences.picture.pixels);
  const maps = noiseMaps(parts);
  const { height, width } = parts.reference;
  set.write("noise.npy", npyBytes("<f4", [variants.length, height, width], maps));
  const noise = noisePicture(parts, maps);
  set.write("noise.png", noise.png, noise.picture.pixels);
  const charts = { "edge-profiles": edgeChart(measured), "point-spreads": spreadChart(variants, measured) };
  for (const [name, chart] of Object.entries(charts)) {
    set.write(`${name}.svg`, chartSvg(chart));
    const { picture, png } = chartPng(chart);
    set.write(`${name}.png`, png, picture.pixels);
  }
  set.write("compare.html", pageOf(parts, range, charts));
}
