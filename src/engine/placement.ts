import { chemicalShiftHz, FAT_MAIN_PEAK_PPM } from "../physics/chemical-shift.js";
import type { ScanFacts } from "../physics/scan.js";
import { pixelBandwidthHz } from "../stages/echo-frame.js";
import { FAT_AS_FIELD, FAT_IN_MAP, WRAP_LIMIT } from "../stages/field-map.js";
import { FOLDED, FOLDED_IN_MAP, NOT_WATER, SAME_BUT_FOR } from "../stages/field-values.js";
import type { Finding } from "../stages/stage.js";
import { RESAMPLED } from "../stages/undisplace.js";
import { type Plan, pixelSizeMm } from "./plan.js";
import type { GroupResult } from "./reconstruct.js";

/** The largest of some lengths, and that below which 95 % of them lie. */
export interface Spread {
  readonly largest: number;
  readonly percentile95: number;
}

export type FatInMap = "separated" | "left out" | "counts as field" | "taken as absent" | "not known";

/** How far pixels may be off, what was corrected, what was not. */
export interface Placement {
  /** The same in sentences. */
  readonly statement: readonly string[];
  /** Hz from one pixel to the next; null along y: each line has an excitation of its own, nothing moves. */
  readonly bandwidthPerPixelHz: { readonly x: number; readonly y: number | null };
  readonly pixelSizeMm: { readonly x: number; readonly y: number };
  /** What `shift-readout` moved everything by. */
  readonly shiftedMm: number;
  /** Where fat's main peak is seen in the images, from its place; in the forward ones where there are both. */
  readonly fat: {
    readonly offsetHz: number;
    readonly pixels: number;
    readonly mm: number;
    /** Whether water and fat were put in their places in maps of their own. */
    readonly separated: boolean;
  };
  /** Null without a field map. */
  readonly field: null | {
    readonly source: string;
    readonly along: "x" | "y";
    readonly corrected: boolean;
    /** Inside the mask. */
    readonly displacementBeforeMm: Spread;
    /**
     * After correction the map's own error, if it is known: not of a given map, nor where fat or the phase between two
     * echoes of opposite directions counts as field.
     */
    readonly displacementAfterMm: Spread | null;
    /** What that is; null where nothing is known. */
    readonly displacementAfterIs: "standard error from noise alone" | "not corrected" | null;
    /** From noise alone. */
    readonly standardErrorMm: Spread | null;
    readonly pixelsInMask: number;
    /** Pixels of the object that lie on others in the image of some echo; 0 in the result. */
    readonly foldedPixels: number;
    /** Pixels with signal that a measured map leaves out of its mask because it folds there. */
    readonly foldedInMapPixels: number;
    /** What fat does to the map. */
    readonly fat: FatInMap;
    /** By how much the map is off where there is fat that counts as field; else null. */
    readonly fatCountsAsHz: number | null;
    readonly fatCountsAsMm: number | null;
    /** A field of this more or less everywhere would look the same in these echoes; null where they tell, or it is given. */
    readonly sameButForHz: number | null;
    readonly sameButForMm: number | null;
    /** A whole turn between the closest echoes of field-map; else null. */
    readonly turnHz: number | null;
    /** How a given map of another matrix was brought to the image's, null if that was not needed. */
    readonly interpolated: string | null;
    /** Pixels with signal that do not follow water from echo to echo, or touch such: left out of the map. */
    readonly leftOutPixels: number;
  };
  /** What an offset of 1 ppm that nobody knows of moves a pixel by. */
  readonly perPpmMm: number;
  readonly findings: readonly (Finding & { readonly group: number })[];
  readonly notIncluded: readonly string[];
}

const NOT_INCLUDED = [
  "gradient non-linearity",
  "concomitant fields",
  "eddy currents",
  "displacement of the slice itself",
];

/** Gathers what the maps say of displacement, group by group in any order. */
export class PlacementTally {
  readonly #groups = new Map<
    number,
    { moved: Float32Array; errors: Float32Array; findings: readonly Finding[] }
  >();

  add(group: number, { maps, findings }: GroupResult): void {
    const map = (name: string) => maps.find((each) => each.name === name)?.data;
    const mask = map("field-mask");
    const inside = (values: Float32Array | undefined) =>
      values && mask ? values.filter((_, i) => mask[i]! > 0) : new Float32Array(0);
    const moved = inside(map("displacement-mm")).map(Math.abs);
    this.#groups.set(group, { moved, errors: inside(map("field-standard-error-hz")), findings });
  }

  get movedMm(): Float32Array {
    return joined([...this.#groups.values()].map(({ moved }) => moved));
  }

  get standardErrorsHz(): Float32Array {
    return joined([...this.#groups.values()].map(({ errors }) => errors));
  }

  get findings(): Placement["findings"] {
    const groups = [...this.#groups].sort(([a], [b]) => a - b);
    return groups.flatMap(([group, { findings }]) => findings.map((finding) => ({ group, ...finding })));
  }

  /** Sum of what a stage found under a name, over the groups; undefined if it looked for nothing of the kind. */
  total(name: string, stage: string): number | undefined {
    const found = this.findings.filter((finding) => finding.name === name && finding.stage === stage);
    return found.length ? found.reduce((sum, { value }) => sum + value, 0) : undefined;
  }
}

/** Arrays one after the other. */
export function joined(parts: readonly Float32Array[]): Float32Array {
  const out = new Float32Array(parts.reduce((sum, { length }) => sum + length, 0));
  let at = 0;
  for (const part of parts) {
    out.set(part, at);
    at += part.length;
  }
  return out;
}

function spreadOf(values: Float32Array): Spread {
  const sorted = values.slice().sort();
  if (sorted.length === 0) return { largest: 0, percentile95: 0 };
  return { largest: sorted.at(-1)!, percentile95: sorted[Math.ceil(0.95 * sorted.length) - 1]! };
}

/** @param tally complete */
export function placementOf(scan: ScanFacts, plan: Plan, tally: PlacementTally): Placement {
  const pixel = pixelSizeMm(plan.result);
  const perPixelHz = pixelBandwidthHz(plan.result, scan);
  const mmPerHz = pixel.x / perPixelHz;
  const moving = plan.stages.find(({ stage }) => stage.id === "undisplace");
  const isAlongY = moving?.physics.along === "y";
  const shift = plan.stages.find(({ stage }) => stage.id === "shift-readout");
  // Of echoes that are all read backward everything is turned round; else the forward ones are spoken of.
  const direction = scan.polarity.every((each) => each === "reverse") ? -1 : 1;
  const shiftedMm = direction * Number(shift?.physics["shift on a forward readout, mm"] ?? 0);
  const fatHz = chemicalShiftHz(FAT_MAIN_PEAK_PPM, scan.resonanceHz);
  const fatMm = direction * fatHz * mmPerHz + shiftedMm;
  const parts = {
    bandwidthPerPixelHz: {
      x: perPixelHz,
      y: isAlongY ? Number.parseFloat(String(moving.physics["bandwidth per pixel, Hz"])) : null,
    },
    pixelSizeMm: { x: pixel.x, y: pixel.y },
    shiftedMm,
    fat: {
      offsetHz: fatHz,
      pixels: fatMm / pixel.x,
      mm: fatMm,
      separated: plan.stages.some(({ stage }) => stage.id === "separate-fat-water"),
    },
    field: fieldPart(plan, scan, tally, isAlongY, mmPerHz),
    perPpmMm: chemicalShiftHz(1, scan.resonanceHz) * mmPerHz,
    findings: tally.findings,
    notIncluded: NOT_INCLUDED,
  };
  return { statement: sentences(parts, scan), ...parts };
}

function fieldPart(
  plan: Plan,
  scan: ScanFacts,
  tally: PlacementTally,
  isAlongY: boolean,
  mmPerHz: number,
): Placement["field"] {
  const maker = plan.stages.find(({ maps }) => maps.some(({ name }) => name === "field-hz"));
  if (!maker) return null;
  const corrected = plan.stages.some(({ stage }) => stage.id === "undisplace");
  const [file] = maker.arrays.keys();
  const before = spreadOf(tally.movedMm);
  const errors = file === undefined ? tally.standardErrorsHz : new Float32Array(0);
  const standardErrorMm = errors.length ? spreadOf(errors.map((hz) => hz * mmPerHz)) : null;
  const fat = fatInMap(maker);
  const asHz = maker.physics[FAT_AS_FIELD];
  const sameButForHz = SAME_BUT_FOR in maker.physics ? Number(maker.physics[SAME_BUT_FOR]) : null;
  const fatCountsAsHz = fat === "counts as field" ? Number(asHz) : null;
  const isUntold = fat === "counts as field" || isOpposedPair(scan);
  const after = corrected ? (isUntold ? null : standardErrorMm) : before;
  return {
    source: file === undefined ? `measured: ${maker.stage.id}` : `given: ${file}`,
    along: isAlongY ? "y" : "x",
    corrected,
    displacementBeforeMm: before,
    displacementAfterMm: after,
    displacementAfterIs: !corrected ? "not corrected" : after && "standard error from noise alone",
    standardErrorMm,
    pixelsInMask: tally.movedMm.length,
    foldedPixels: tally.total(FOLDED, "undisplace") ?? 0,
    foldedInMapPixels: tally.total(FOLDED_IN_MAP, maker.stage.id) ?? 0,
    fat,
    fatCountsAsHz,
    fatCountsAsMm: fatCountsAsHz === null ? null : fatCountsAsHz * mmPerHz,
    sameButForHz,
    sameButForMm: sameButForHz === null ? null : sameButForHz * mmPerHz,
    turnHz: WRAP_LIMIT in maker.physics ? 2 * Number(maker.physics[WRAP_LIMIT]) : null,
    interpolated: RESAMPLED in maker.physics ? String(maker.physics[RESAMPLED]) : null,
    leftOutPixels: tally.total(NOT_WATER, maker.stage.id) ?? 0,
  };
}

/** Two echoes of opposite directions: nothing tells a phase between them from the field. */
function isOpposedPair({ polarity }: ScanFacts): boolean {
  return polarity.length === 2 && polarity[0] !== polarity[1];
}

function fatInMap({ stage, physics }: Plan["stages"][number]): FatInMap {
  if (stage.id === "separate-fat-water") return "separated";
  return stage.id === "field-map" ? (physics[FAT_IN_MAP] as FatInMap) : "not known";
}

function sentences(parts: Omit<Placement, "statement">, scan: ScanFacts): string[] {
  const { bandwidthPerPixelHz: hz, pixelSizeMm: pixel, fat, field, shiftedMm, perPpmMm } = parts;
  const mm = (value: number) => `${number(value)} mm`;
  const both = (value: number) => `${mm(value)} (${number(value / pixel[field?.along ?? "x"])} px)`;
  const lines = [
    hz.y === null
      ? `x: ${number(hz.x)} Hz per pixel of ${mm(pixel.x)}; y: nothing moves, each line has its own excitation`
      : `x: ${number(hz.x)} Hz per pixel of ${mm(pixel.x)}; y: ${number(hz.y)} Hz per pixel of ${mm(pixel.y)}`,
  ];
  if (shiftedMm !== 0)
    lines.push(`everything was moved by ${mm(shiftedMm)} along x (shift-readout), water too`);
  lines.push(
    `fat is seen ${number(fat.pixels)} px (${mm(fat.mm)}) from its place along x` +
      otherWay(scan.polarity) +
      (fat.separated
        ? "; water.npy and fat.npy have both in place"
        : shiftedMm === 0
          ? ", not corrected"
          : ""),
  );
  if (!field) lines.push(`the field is not known: each ppm of it moves a pixel by ${mm(perPpmMm)} along x`);
  else lines.push(...fieldSentences(field, scan, both, hz.x / pixel.x));
  lines.push(`not included: ${parts.notIncluded.join(", ")}`);
  return lines;
}

/** @param both a length in mm and pixels */
function fieldSentences(
  field: NonNullable<Placement["field"]>,
  scan: ScanFacts,
  both: (mm: number) => string,
  hzPerMm: number,
): string[] {
  const { displacementBeforeMm: before, standardErrorMm: error, fatCountsAsMm, corrected } = field;
  const done = fatCountsAsMm === null ? "corrected" : "corrected by a map that takes fat for field";
  const lines = [
    `field (${field.source}): moved the ${field.pixelsInMask} pixels of its mask by up to ${both(before.largest)} along ${field.along}, ` +
      `95 % within ${both(before.percentile95)}; ${corrected ? done : "not corrected"}`,
  ];
  if (error)
    lines.push(
      `the map's standard error, from noise alone, is up to ${both(error.largest)}, 95 % within ${both(error.percentile95)}`,
    );
  else if (corrected && field.fat === "not known")
    lines.push("what remains is the error of the given map, which is not known here");
  else if (corrected) lines.push("two echoes leave nothing over to tell the error of the map by");
  if (field.sameButForMm !== null)
    lines.push(
      `nothing in these echoes tells a whole turn: a field of ${number(field.sameButForHz!)} Hz more or less everywhere, ` +
        `${both(field.sameButForMm)}, would look the same; the one nearest zero was taken`,
    );
  if (field.interpolated)
    lines.push(
      `the map was interpolated ${field.interpolated}: it is taken to cover the image's field of view`,
    );
  if (fatCountsAsMm !== null)
    lines.push(
      `these echoes do not tell fat from water: where there is fat the map is off by ${number(field.fatCountsAsHz!)} Hz, ` +
        `or whole turns (${number(field.turnHz!)} Hz) from there, which is ${both(fatCountsAsMm)} or more` +
        `${corrected ? ", and so is the image" : ""}; ` +
        "set field-map.fat=absent if there is none, else take separate-fat-water with a method that suits these echoes",
    );
  if (field.turnHz !== null && isOpposedPair(scan)) {
    const hz = (0.1 / (2 * Math.PI)) * field.turnHz;
    lines.push(
      `the two echoes are read in opposite directions: a phase between them that is not the field's counts as field, ` +
        `each 0.1 rad as ${number(hz)} Hz, which is ${both(hz / hzPerMm)}`,
    );
  }
  if (field.fat === "separated")
    lines.push(
      "a piece of one species alone that nothing joins to the rest may be the other one: the field that suits the rest decided",
    );
  if (field.fat === "taken as absent") lines.push("fat was taken to be absent, as field-map.fat says");
  if (field.leftOutPixels)
    lines.push(
      `${field.leftOutPixels} pixels that do not follow water from echo to echo, or touch such, were left out of the map: ` +
        "the field there continues its surroundings; separate-fat-water measures it there too",
    );
  if (field.foldedInMapPixels)
    lines.push(
      `${field.foldedInMapPixels} pixels with signal were left out of the map because it folds there`,
    );
  if (field.foldedPixels)
    lines.push(
      `${field.foldedPixels} pixels of the object lie where the field folds: left at 0, nothing is invented there`,
    );
  return lines;
}

function otherWay(polarity: ScanFacts["polarity"]): string {
  if (polarity.includes("mixed")) return " on lines read forward, the other way on the others";
  const isBoth = polarity.includes("reverse") && polarity.includes("forward");
  return isBoth ? ", the other way in echoes read backward" : "";
}

/** Three digits, and never an exponent for what rounds to nothing. */
function number(value: number): string {
  if (Math.abs(value) < 5e-5) return "0";
  return String(Math.abs(value) >= 100 ? Number(value.toFixed(1)) : Number(value.toPrecision(3)));
}
