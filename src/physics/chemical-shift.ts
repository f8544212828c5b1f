/**
 * Chemical shift of fat against water.
 *
 * Signs: a peak below water has a negative shift in ppm and in Hz; a spin with an offset of df Hz turns as
 * exp(-i 2 pi df t) and is seen at `x + df / bandwidthPerPixel` on a forward readout, at
 * `x - df / bandwidthPerPixel` on a reversed one.
 */

/** Main (methylene) peak of fat against water, ppm: 1.3 - 4.7. Values of -3.35 to -3.5 are also in use. */
export const FAT_MAIN_PEAK_PPM = -3.4;

export interface SpectralPeak {
  /** Shift against water, ppm. */
  readonly ppm: number;
  /** Share of the signal; the shares of a spectrum add up to 1. */
  readonly share: number;
}

/**
 * Six groups of peaks of the fat of human liver, against water at 4.7 ppm.
 * Hamilton et al. 2011, NMR Biomed 24:784, doi:10.1002/nbm.1622 (grouped table).
 */
export const FAT_SPECTRUM: readonly SpectralPeak[] = [
  { ppm: 5.3 - 4.7, share: 0.047 },
  { ppm: 4.2 - 4.7, share: 0.039 },
  { ppm: 2.75 - 4.7, share: 0.006 },
  { ppm: 2.1 - 4.7, share: 0.12 },
  { ppm: 1.3 - 4.7, share: 0.7 },
  { ppm: 0.9 - 4.7, share: 0.088 },
];

/** Offset in Hz of a peak `ppm` from water, at a resonance frequency of `resonanceHz` (the header's, not gamma B0). */
export function chemicalShiftHz(ppm: number, resonanceHz: number): number {
  return ppm * 1e-6 * resonanceHz;
}

/** Displacement in pixels along a forward readout of a spin `offsetHz` off resonance. A reversed readout negates it. */
export function shiftPixels(offsetHz: number, pixelBandwidthHz: number): number {
  return offsetHz / pixelBandwidthHz;
}

/** The `count`-th echo time (from 1), seconds, at which a peak `offsetHz` from water is in phase with it: n / |df|. Dixon 1984, Radiology 153:189. */
export function inPhaseEchoSeconds(offsetHz: number, count = 1): number {
  return count / Math.abs(offsetHz);
}

/** The `count`-th echo time (from 1), seconds, of opposed phase: (n - 1/2) / |df|. Dixon 1984, Radiology 153:189. */
export function opposedPhaseEchoSeconds(offsetHz: number, count = 1): number {
  return inPhaseEchoSeconds(offsetHz, count - 0.5);
}

/**
 * Signal of a spectrum `seconds` after its peaks were in phase: `sum share exp(-i 2 pi df t)`; 1 at t = 0.
 * @returns real and imaginary part
 */
export function spectrumSignal(
  peaks: readonly SpectralPeak[],
  resonanceHz: number,
  seconds: number,
): readonly [re: number, im: number] {
  let re = 0;
  let im = 0;
  for (const peak of peaks) {
    const angle = -2 * Math.PI * chemicalShiftHz(peak.ppm, resonanceHz) * seconds;
    re += peak.share * Math.cos(angle);
    im += peak.share * Math.sin(angle);
  }
  return [re, im];
}

/** The spectrum with its main peak at `mainPpm` and all others moved with it: water moves with temperature, fat does not. */
export function fatSpectrumAt(mainPpm: number): readonly SpectralPeak[] {
  const move = mainPpm - FAT_MAIN_PEAK_PPM;
  return FAT_SPECTRUM.map(({ ppm, share }) => ({ ppm: ppm + move, share }));
}

/**
 * The echo time, seconds, at which a spectrum is most opposed to water: where the real part of its signal is least, near
 * the opposed phase of its main peak, `offsetHz` from water.
 */
export function mostOpposedEchoSeconds(
  peaks: readonly SpectralPeak[],
  resonanceHz: number,
  offsetHz: number,
): number {
  const real = (seconds: number) => spectrumSignal(peaks, resonanceHz, seconds)[0];
  let from = 0.5 * opposedPhaseEchoSeconds(offsetHz);
  let to = 3 * from;
  for (let i = 0; i < 60; i++) {
    const third = (to - from) / 3;
    if (real(from + third) < real(to - third)) to -= third;
    else from += third;
  }
  return (from + to) / 2;
}
