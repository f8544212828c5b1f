import type { ReadoutHead } from "./record.js";

/** Flag numbers of the raw-data standard (ismrmrd.h); flag n is bit n - 1. */
export const FLAG = {
  firstInStep1: 1,
  lastInStep1: 2,
  firstInSlice: 7,
  lastInSlice: 8,
  firstInRepetition: 13,
  lastInRepetition: 14,
  noise: 19,
  calibration: 20,
  calibrationAndImaging: 21,
  reverse: 22,
  navigation: 23,
  phaseCorrection: 24,
  lastInMeasurement: 25,
  hpFeedback: 26,
  dummy: 27,
  rtFeedback: 28,
  surfaceCoilCorrection: 29,
  phaseStabilizationReference: 30,
  phaseStabilization: 31,
} as const;
export type FlagName = keyof typeof FLAG;

export const ROLES = [
  "image",
  "noise",
  "calibration",
  "phase-correction",
  "navigation",
  "dummy",
  "other",
] as const;
/** What a readout is for. `calibration` is for parallel imaging only; embedded calibration lines are `image` too. */
export type Role = (typeof ROLES)[number];

function has(head: ReadoutHead, flag: number): boolean {
  return ((head.flags >> BigInt(flag - 1)) & 1n) === 1n;
}

export function isReversed(head: ReadoutHead): boolean {
  return has(head, FLAG.reverse);
}

/**
 * What a readout is for, from its flags. Calibration lines of an embedded calibration belong to the image's own
 * k-space and land in it; those of a separate or external one do not.
 */
export function roleOf(head: ReadoutHead, calibrationMode: string | undefined): Role {
  if (has(head, FLAG.noise)) return "noise";
  if (has(head, FLAG.phaseCorrection)) return "phase-correction";
  if (has(head, FLAG.navigation)) return "navigation";
  if (has(head, FLAG.dummy)) return "dummy";
  for (const flag of [
    FLAG.hpFeedback,
    FLAG.rtFeedback,
    FLAG.surfaceCoilCorrection,
    FLAG.phaseStabilizationReference,
    FLAG.phaseStabilization,
  ])
    if (has(head, flag)) return "other";
  if (has(head, FLAG.calibrationAndImaging)) return "image";
  if (has(head, FLAG.calibration)) return calibrationMode === "embedded" ? "image" : "calibration";
  return "image";
}
