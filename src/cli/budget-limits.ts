import type { Scan } from "../engine/scan.js";
import { UsageError } from "../errors.js";
import { aliasedPositionMm, readoutBandwidthHz, readoutGradientTPerM } from "../physics/bandwidth.js";
import {
  type BudgetPoint,
  dwellSecondsAt,
  gradientLimits,
  type ReadoutPlan,
} from "../physics/readout-budget.js";
import { DEFAULT_FIELD_T, DEFAULT_OVERSAMPLING } from "./budget-plan.js";
import type { Flags } from "./command.js";

/** Of a limit: what reaches it exactly must pass, whatever the last bit. */
const SLACK = 1e-9;

/** @throws UsageError for a gradient beyond the limit, or an object larger than what is encoded; its mend works */
export function refuseImpossible(flags: Flags, plan: ReadoutPlan): void {
  refuseGradient(flags["max-gradient"] as number | undefined, plan);
  refuseAliasing(flags["object-mm"] as number | undefined, plan);
}

function refuseGradient(most: number | undefined, plan: ReadoutPlan): void {
  const gradient =
    1e3 * readoutGradientTPerM(readoutBandwidthHz(plan.dwellSeconds), plan.encodedFovMm * 1e-3);
  if (most === undefined || gradient <= most * (1 + SLACK)) return;
  const { leastFovMm, mostPixelHz } = gradientLimits(plan, most * 1e-3);
  const pixelHz = roundedDown(mostPixelHz);
  const dwellUs = roundedUp(1e6 * dwellSecondsAt(plan, mostPixelHz));
  const fovMm = roundedUp((leastFovMm * plan.fovMm) / plan.encodedFovMm);
  throw new UsageError(
    { field: "--max-gradient", value: most },
    `the readout needs ${digits(gradient)} mT/m`,
    `Use at most ${pixelHz} Hz per pixel (a dwell time of ${dwellUs} us), or a field of view of ${fovMm} mm or more`,
  );
}

function refuseAliasing(objectMm: number | undefined, plan: ReadoutPlan): void {
  if (objectMm === undefined || objectMm <= plan.encodedFovMm * (1 + SLACK)) return;
  const [right, left] = [objectMm / 2, -objectMm / 2].map((end) => aliasedPositionMm(end, plan.encodedFovMm));
  const fovMm = roundedUp((objectMm * plan.fovMm) / plan.encodedFovMm);
  // In whole samples: what the flag asks for is rounded to them.
  const acquired = (plan.encodedSamples * plan.fovMm) / plan.encodedFovMm;
  const samples = Math.ceil((acquired * objectMm) / plan.fovMm - SLACK);
  throw new UsageError(
    { field: "--object-mm", value: objectMm },
    `is larger than the ${digits(plan.encodedFovMm)} mm that are encoded: its ends at ${digits(objectMm / 2)} and ` +
      `${digits(-objectMm / 2)} mm come in at the other side, at ${digits(right!)} and ${digits(left!)} mm`,
    `Use --fov-mm ${fovMm} or more, or --oversampling ${roundedUp(samples / acquired)} or more`,
  );
}

/** What a reader should know of the numbers: what was assumed, and where they do not tell all. */
export function budgetNotes(
  flags: Flags,
  plan: ReadoutPlan,
  present: BudgetPoint,
  scan: Scan | undefined,
): string[] {
  return [
    ...assumptions(flags, scan),
    ...(scan ? scanNotes(scan) : []),
    ...objectNotes(flags["object-mm"] as number | undefined, plan, present),
  ];
}

function assumptions(flags: Flags, scan: Scan | undefined): string[] {
  const assumed = [];
  if (!scan && flags["field-t"] === undefined) assumed.push(`${DEFAULT_FIELD_T} T`);
  if (!scan && flags.oversampling === undefined) assumed.push(`oversampling ${DEFAULT_OVERSAMPLING}`);
  return assumed.length ? [`assumed: ${assumed.join(", ")}`] : [];
}

function scanNotes({ facts }: Scan): string[] {
  const notes = [];
  if (facts.trajectory === "epi")
    notes.push(
      "echo-planar: the numbers are along the readout, taken as flat; along the phase direction an offset moves far more",
    );
  if (facts.trajectory === "radial" || facts.trajectory === "goldenangle")
    notes.push("radial: an offset moves along each spoke, so it blurs instead of displacing");
  const { first, last } = facts.acquired.x;
  const share = (last - first + 1) / facts.encoded.matrix.x;
  if (share < 1)
    notes.push(
      `partial echo: ${digits(100 * share)} % of the samples are there; duration and point spread are those of all`,
    );
  return notes;
}

function objectNotes(objectMm: number | undefined, plan: ReadoutPlan, present: BudgetPoint): string[] {
  if (objectMm === undefined) return [];
  const beyondMm = objectMm / 2 + Math.abs(present.fatMm) - plan.encodedFovMm / 2;
  const notes = [];
  if (objectMm > plan.fovMm * (1 + SLACK))
    notes.push(
      `the object is larger than the field of view of ${digits(plan.fovMm)} mm: its ends are cut off`,
    );
  if (beyondMm > SLACK)
    notes.push(`fat at the object's end comes in at the other side, ${digits(beyondMm)} mm of it`);
  return notes;
}

function digits(value: number): string {
  return String(Number(value.toPrecision(4)));
}

/** Four digits, not below the value. */
function roundedUp(value: number): number {
  const unit = 10 ** (Math.floor(Math.log10(value)) - 3);
  return Number((Math.ceil(value / unit - SLACK) * unit).toPrecision(4));
}

/** Four digits, not above the value. */
function roundedDown(value: number): number {
  const unit = 10 ** (Math.floor(Math.log10(value)) - 3);
  return Number((Math.floor(value / unit + SLACK) * unit).toPrecision(4));
}
