import { GYROMAGNETIC_RATIO_HZ_PER_T } from "./larmor.js";

/**
 * Straight, evenly sampled readouts: bandwidth, duration, gradient, and what follows from them.
 *
 * Source: Haacke, Brown, Thompson, Venkatesan, Magnetic Resonance Imaging: Physical Principles and Sequence
 * Design; Bernstein, King, Zhou, Handbook of MRI Pulse Sequences.
 */

/** Bandwidth of the whole readout, Hz: one over the dwell time. */
export function readoutBandwidthHz(dwellSeconds: number): number {
  return 1 / dwellSeconds;
}

/** Time from the first to one past the last of `encodedSamples`, seconds. */
export function readoutDurationSeconds(encodedSamples: number, dwellSeconds: number): number {
  return encodedSamples * dwellSeconds;
}

/**
 * Hz between neighbouring pixels along the readout: `1 / (N dwell)`, N the encoded samples with oversampling.
 * Cropping the oversampled field of view afterwards leaves it unchanged.
 */
export function bandwidthPerPixelHz(encodedSamples: number, dwellSeconds: number): number {
  return 1 / readoutDurationSeconds(encodedSamples, dwellSeconds);
}

/** Readout gradient in T/m that spreads `bandwidthHz` over `fieldOfViewM` metres (the encoded one): `BW / ((gamma/2pi) FOV)`. */
export function readoutGradientTPerM(bandwidthHz: number, fieldOfViewM: number): number {
  return bandwidthHz / (GYROMAGNETIC_RATIO_HZ_PER_T * fieldOfViewM);
}

/** Smallest field of view in metres that a gradient of `gradientTPerM` reaches at `bandwidthHz`. */
export function smallestFieldOfViewM(bandwidthHz: number, gradientTPerM: number): number {
  return bandwidthHz / (GYROMAGNETIC_RATIO_HZ_PER_T * gradientTPerM);
}

/** Where a point at `positionMm` appears in a field of view of `fovMm` about 0: in [-fov/2, fov/2). */
export function aliasedPositionMm(positionMm: number, fovMm: number): number {
  const half = fovMm / 2;
  return ((((positionMm + half) % fovMm) + fovMm) % fovMm) - half;
}

/**
 * Full width at half maximum, in pixels, of the point spread of a readout during which the signal decays as
 * exp(-t / T2*): `|sinc(x + i b)|` with `b = 1 / (2 pi T2* BWpp)` and sinc(z) = sin(pi z) / (pi z).
 * Without decay (`t2StarSeconds` = Infinity) it is 1.2067 pixels.
 */
export function t2StarBlurWidthPixels(t2StarSeconds: number, pixelBandwidthHz: number): number {
  const b = 1 / (2 * Math.PI * t2StarSeconds * pixelBandwidthHz);
  const half = squaredSinc(0, b) / 4;
  let inside = 0;
  let outside = 0.25; // the spread falls steadily over its main lobe: step out, then bisect
  while (squaredSinc(outside, b) > half) {
    inside = outside;
    outside += 0.25;
  }
  for (let i = 0; i < 50; i++) {
    const middle = (inside + outside) / 2;
    if (squaredSinc(middle, b) > half) inside = middle;
    else outside = middle;
  }
  return inside + outside;
}

/** `|sinc(x + i b)|^2 = (sin^2(pi x) + sinh^2(pi b)) / (pi^2 (x^2 + b^2))`. */
function squaredSinc(x: number, b: number): number {
  if (x === 0 && b === 0) return 1;
  return (Math.sin(Math.PI * x) ** 2 + Math.sinh(Math.PI * b) ** 2) / (Math.PI ** 2 * (x * x + b * b));
}
