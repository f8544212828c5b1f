/** Gyromagnetic ratio of the bare proton over 2 pi, Hz/T. CODATA 2022, uncertainty 0.018 Hz/T. */
export const GYROMAGNETIC_RATIO_HZ_PER_T = 42.577478461e6;

/**
 * The same for a proton shielded by water (spherical sample, 25 degrees C), Hz/T. CODATA 2022.
 * About 25.7 ppm below the bare proton: 3.3 kHz at 3 T, so a header's resonance frequency is preferred to either.
 */
export const SHIELDED_GYROMAGNETIC_RATIO_HZ_PER_T = 42.57638543e6;

/** Larmor frequency in Hz of the bare proton at `fieldT` tesla: `(gamma / 2 pi) B0`. */
export function larmorHz(fieldT: number): number {
  return GYROMAGNETIC_RATIO_HZ_PER_T * fieldT;
}

/** The field in tesla at which the bare proton resonates at `resonanceHz`. */
export function fieldFromLarmorT(resonanceHz: number): number {
  return resonanceHz / GYROMAGNETIC_RATIO_HZ_PER_T;
}
