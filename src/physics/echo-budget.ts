import { fatSpectrumAt, spectrumSignal } from "./chemical-shift.js";
import type { BudgetPoint } from "./readout-budget.js";

/** One echo of a train, as it is to be or was. */
export interface PlannedEcho {
  /** Time since water and fat were in phase; undefined where it is not known. */
  readonly seconds: number | undefined;
  /** `mixed` where lines of both directions make one image. */
  readonly direction: "forward" | "reverse" | "mixed";
}

/** Where fat and the field error are seen in one echo, with the sign of its reading direction. */
export interface EchoBudget {
  /** From 0. */
  readonly echo: number;
  readonly echoTimeSeconds: number | null;
  readonly direction: "forward" | "reverse";
  readonly fatPixels: number;
  readonly fatMm: number;
  readonly fieldErrorPixels: number;
  readonly fieldErrorMm: number;
  /** Signal of six-peak fat against its signal in phase, phase 0 that of water; null where the echo time is not known. */
  readonly fatSignal: null | {
    readonly real: number;
    readonly imaginary: number;
    readonly magnitude: number;
    readonly phaseDegrees: number;
  };
}

/** Echo by echo; one of mixed directions has an entry for each. @param present of a forward readout */
export function echoBudgets(
  echoes: readonly PlannedEcho[],
  present: BudgetPoint,
  fatPpm: number,
  resonanceHz: number,
): EchoBudget[] {
  const peaks = fatSpectrumAt(fatPpm);
  return echoes.flatMap(({ seconds, direction }, echo) =>
    (direction === "mixed" ? (["forward", "reverse"] as const) : [direction]).map((each) => {
      const sign = each === "forward" ? 1 : -1;
      return {
        echo,
        echoTimeSeconds: seconds ?? null,
        direction: each,
        fatPixels: sign * present.fatPixels,
        fatMm: sign * present.fatMm,
        fieldErrorPixels: sign * present.fieldErrorPixels,
        fieldErrorMm: sign * present.fieldErrorMm,
        fatSignal: seconds === undefined ? null : polar(spectrumSignal(peaks, resonanceHz, seconds)),
      };
    }),
  );
}

function polar([real, imaginary]: readonly [number, number]) {
  const phaseDegrees = (Math.atan2(imaginary, real) * 180) / Math.PI;
  return { real, imaginary, magnitude: Math.hypot(real, imaginary), phaseDegrees };
}
