import {
  readoutBandwidthHz,
  readoutDurationSeconds,
  readoutGradientTPerM,
  smallestFieldOfViewM,
  t2StarBlurWidthPixels,
} from "./bandwidth.js";
import {
  chemicalShiftHz,
  inPhaseEchoSeconds,
  opposedPhaseEchoSeconds,
  shiftPixels,
} from "./chemical-shift.js";
import { concomitantOffsetHz } from "./concomitant-field.js";

/** A straight, evenly sampled readout, as it is to be or was. */
export interface ReadoutPlan {
  readonly fieldT: number;
  readonly resonanceHz: number;
  /** Samples and field of view with oversampling. */
  readonly encodedSamples: number;
  readonly encodedFovMm: number;
  /** Pixels and field of view of the image. */
  readonly pixels: number;
  readonly fovMm: number;
  readonly dwellSeconds: number;
}

/** What the plan is to be judged by. */
export interface BudgetQuestions {
  /** Fat's main peak against water, ppm. */
  readonly fatPpm: number;
  /** An offset of the field that nobody corrects, Hz. */
  readonly fieldErrorHz: number;
  /** Share of a pixel that a displacement may reach. */
  readonly withinPixels: number;
  /** Infinity without decay. */
  readonly t2StarSeconds: number;
  /** Distance from the isocentre along the main field, metres. */
  readonly isocentreM: number;
}

/** One bandwidth and what follows from it. Pixels are those of the image; displacements those of a forward readout. */
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
  /** Full width at half maximum of the point spread with decay. */
  readonly blurPixels: number;
  readonly blurMm: number;
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
  /** The budget at those bandwidths; null where there is no offset. */
  readonly atSmallestForFat: BudgetPoint | null;
  readonly atSmallestForFieldError: BudgetPoint | null;
  readonly inPhaseSeconds: readonly number[];
  readonly opposedPhaseSeconds: readonly number[];
}

/** Echo times that are listed. */
const ECHO_TIMES = 4;

/** What a readout plan costs and gives. Formulas and sources: bandwidth.ts, chemical-shift.ts, concomitant-field.ts. */
export function readoutBudget(plan: ReadoutPlan, questions: BudgetQuestions): Budget {
  const fatHz = chemicalShiftHz(questions.fatPpm, plan.resonanceHz);
  const times = Array.from({ length: ECHO_TIMES }, (_, i) => i + 1);
  const smallestForFatHz = Math.abs(fatHz) / questions.withinPixels;
  const smallestForFieldErrorHz = Math.abs(questions.fieldErrorHz) / questions.withinPixels;
  const at = (pixelHz: number) =>
    pixelHz > 0 ? budgetPoint(plan, questions, dwellSecondsAt(plan, pixelHz)) : null;
  return {
    present: budgetPoint(plan, questions, plan.dwellSeconds),
    fatHz,
    fieldErrorHz: questions.fieldErrorHz,
    smallestForFatHz,
    smallestForFieldErrorHz,
    atSmallestForFat: at(smallestForFatHz),
    atSmallestForFieldError: at(smallestForFieldErrorHz),
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
  const pixelMm = plan.fovMm / plan.pixels;
  const pixelBandwidthHz = (bandwidthHz * pixelMm) / plan.encodedFovMm;
  const gradientTPerM = readoutGradientTPerM(bandwidthHz, plan.encodedFovMm * 1e-3);
  const fatPixels = shiftPixels(chemicalShiftHz(questions.fatPpm, plan.resonanceHz), pixelBandwidthHz);
  const fieldErrorPixels = shiftPixels(questions.fieldErrorHz, pixelBandwidthHz);
  // Samples limit the resolution, so the blur is one of acquired pixels: an interpolated image has more of them.
  const acquiredMm = plan.encodedFovMm / plan.encodedSamples;
  const blurMm =
    acquiredMm * t2StarBlurWidthPixels(questions.t2StarSeconds, bandwidthHz / plan.encodedSamples);
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
    blurPixels: blurMm / pixelMm,
    blurMm,
    concomitantHz,
    concomitantPixels: concomitantHz / pixelBandwidthHz,
  };
}

/** The dwell time of a bandwidth per pixel of the image. */
export function dwellSecondsAt(plan: ReadoutPlan, pixelHz: number): number {
  return plan.fovMm / plan.pixels / (pixelHz * plan.encodedFovMm);
}

/** Dwell times whose bandwidths per pixel are spaced evenly on a logarithmic scale, from `lowHz` to `highHz`. */
export function sweepDwellSeconds(plan: ReadoutPlan, lowHz: number, highHz: number, count: number): number[] {
  return Array.from({ length: count }, (_, i) =>
    dwellSecondsAt(plan, count === 1 ? lowHz : lowHz * (highHz / lowHz) ** (i / (count - 1))),
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
