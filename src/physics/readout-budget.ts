import {
  readoutBandwidthHz,
  readoutDurationSeconds,
  readoutGradientTPerM,
  smallestFieldOfViewM,
  t2StarBlurWidthPixels,
} from "./bandwidth.js";
import {
  chemicalShiftHz,
  FAT_MAIN_PEAK_PPM,
  inPhaseEchoSeconds,
  opposedPhaseEchoSeconds,
} from "./chemical-shift.js";
import { concomitantOffsetHz } from "./concomitant-field.js";

/** A straight, evenly sampled readout, as it is to be or was. */
export interface ReadoutPlan {
  readonly fieldT: number;
  readonly resonanceHz: number;
  /** Samples and field of view with oversampling. */
  readonly encodedSamples: number;
  readonly encodedFovMm: number;
  /** Pixels and field of view that are kept. */
  readonly pixels: number;
  readonly fovMm: number;
  readonly dwellSeconds: number;
}

/** What the plan is to be judged by. */
export interface BudgetQuestions {
  /** An offset of the field that nobody corrects, Hz. */
  readonly fieldErrorHz: number;
  /** Share of a pixel that a displacement may reach. */
  readonly withinPixels: number;
  /** Infinity without decay. */
  readonly t2StarSeconds: number;
  /** Distance from the isocentre along the main field, metres. */
  readonly isocentreM: number;
}

/** One bandwidth and what follows from it. Displacements are those of a forward readout. */
export interface BudgetPoint {
  readonly pixelBandwidthHz: number;
  readonly bandwidthHz: number;
  readonly dwellSeconds: number;
  readonly durationSeconds: number;
  readonly gradientTPerM: number;
  readonly fatPixels: number;
  readonly fatMm: number;
  readonly fieldErrorPixels: number;
  readonly fieldErrorMm: number;
  /** Signal to noise against the plan's own bandwidth: the root of the ratio of sampling times. */
  readonly relativeSnr: number;
  /** Full width at half maximum of the point spread with decay, pixels. */
  readonly blurPixels: number;
  /** Of the readout gradient at the distance from the isocentre, if the gradient is transverse. */
  readonly concomitantHz: number;
  readonly concomitantPixels: number;
}

export interface Budget {
  readonly present: BudgetPoint;
  readonly fatHz: number;
  readonly fieldErrorHz: number;
  /** Smallest bandwidths per pixel that keep fat and the field error within the share of a pixel. */
  readonly smallestForFatHz: number;
  readonly smallestForFieldErrorHz: number;
  readonly inPhaseSeconds: readonly number[];
  readonly opposedPhaseSeconds: readonly number[];
}

/** Echo times that are listed. */
const ECHO_TIMES = 4;

/** What a readout plan costs and gives. Formulas and sources: bandwidth.ts, chemical-shift.ts, concomitant-field.ts. */
export function readoutBudget(plan: ReadoutPlan, questions: BudgetQuestions): Budget {
  const fatHz = chemicalShiftHz(FAT_MAIN_PEAK_PPM, plan.resonanceHz);
  const times = Array.from({ length: ECHO_TIMES }, (_, i) => i + 1);
  return {
    present: budgetPoint(plan, questions, plan.dwellSeconds),
    fatHz,
    fieldErrorHz: questions.fieldErrorHz,
    smallestForFatHz: Math.abs(fatHz) / questions.withinPixels,
    smallestForFieldErrorHz: Math.abs(questions.fieldErrorHz) / questions.withinPixels,
    inPhaseSeconds: times.map((count) => inPhaseEchoSeconds(fatHz, count)),
    opposedPhaseSeconds: times.map((count) => opposedPhaseEchoSeconds(fatHz, count)),
  };
}

/** The plan at another dwell time. */
export function budgetPoint(
  plan: ReadoutPlan,
  questions: BudgetQuestions,
  dwellSeconds: number,
): BudgetPoint {
  const bandwidthHz = readoutBandwidthHz(dwellSeconds);
  // Hz per pixel of the image: the encoded pixel where nothing is interpolated.
  const pixelMm = plan.fovMm / plan.pixels;
  const pixelBandwidthHz = (bandwidthHz * pixelMm) / plan.encodedFovMm;
  const gradientTPerM = readoutGradientTPerM(bandwidthHz, plan.encodedFovMm * 1e-3);
  const fatPixels = chemicalShiftHz(FAT_MAIN_PEAK_PPM, plan.resonanceHz) / pixelBandwidthHz;
  const fieldErrorPixels = questions.fieldErrorHz / pixelBandwidthHz;
  const concomitantHz = concomitantOffsetHz([gradientTPerM, 0, 0], [0, 0, questions.isocentreM], plan.fieldT);
  return {
    pixelBandwidthHz,
    bandwidthHz,
    dwellSeconds,
    durationSeconds: readoutDurationSeconds(plan.encodedSamples, dwellSeconds),
    gradientTPerM,
    fatPixels,
    fatMm: fatPixels * pixelMm,
    fieldErrorPixels,
    fieldErrorMm: fieldErrorPixels * pixelMm,
    relativeSnr: Math.sqrt(dwellSeconds / plan.dwellSeconds),
    blurPixels: t2StarBlurWidthPixels(questions.t2StarSeconds, pixelBandwidthHz),
    concomitantHz,
    concomitantPixels: concomitantHz / pixelBandwidthHz,
  };
}

/** Dwell times whose bandwidths per pixel are spaced evenly on a logarithmic scale, from `lowHz` to `highHz`. */
export function sweepDwellSeconds(plan: ReadoutPlan, lowHz: number, highHz: number, count: number): number[] {
  const dwellAt = (pixelHz: number) => plan.fovMm / plan.pixels / (pixelHz * plan.encodedFovMm);
  return Array.from({ length: count }, (_, i) =>
    dwellAt(count === 1 ? lowHz : lowHz * (highHz / lowHz) ** (i / (count - 1))),
  );
}

/** What a gradient limit allows: the smallest encoded field of view at this bandwidth, and the largest bandwidth per pixel at this field of view. */
export function gradientLimits(
  plan: ReadoutPlan,
  mostTPerM: number,
): { leastFovMm: number; mostPixelHz: number } {
  const bandwidthHz = readoutBandwidthHz(plan.dwellSeconds);
  const leastFovMm = 1e3 * smallestFieldOfViewM(bandwidthHz, mostTPerM);
  const pixelHz = (bandwidthHz * plan.fovMm) / plan.pixels / plan.encodedFovMm;
  return { leastFovMm, mostPixelHz: (pixelHz * plan.encodedFovMm) / leastFovMm };
}
