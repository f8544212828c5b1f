import type { SpectralPeak } from "../physics/chemical-shift.js";
import type { PhantomName } from "./phantom.js";

/** What to acquire of which object. Everything has a default (acquisition.ts); lengths in mm, times in seconds. */
export interface AcquisitionOptions {
  readonly phantom?: PhantomName | undefined;
  /** Side of the square that holds the phantom. Default: the smaller side of the field of view. */
  readonly phantomSizeMm?: number | undefined;
  /** Pixels of the image; y = 1 gives projections only. */
  readonly matrix?: { readonly x: number; readonly y: number } | undefined;
  /** Field of view of the image; the readout's encoded one is `readoutOversampling` times as long. */
  readonly fovMm?: { readonly x: number; readonly y: number } | undefined;
  readonly readoutOversampling?: number | undefined;
  readonly coils?: number | undefined;
  readonly slices?: number | undefined;
  /** Distance between the centres of neighbouring slices. */
  readonly sliceSpacingMm?: number | undefined;
  readonly sliceThicknessMm?: number | undefined;
  /** Order in time: even counters before odd ones, or ascending. */
  readonly sliceOrder?: "interleaved" | "ascending" | undefined;
  /** From the excitation to the sample at k = 0; one contrast each. */
  readonly echoTimesSeconds?: readonly number[] | undefined;
  /** Which contrasts are read backward: none, every second one (1, 3, ...), or all. */
  readonly reversedEchoes?: "none" | "odd" | "all" | undefined;
  readonly repetitions?: number | undefined;
  readonly averages?: number | undefined;
  /** Time between samples. */
  readonly dwellSeconds?: number | undefined;
  readonly fieldT?: number | undefined;
  /** Spectrum of the fat part; its shares should add up to 1. */
  readonly fatSpectrum?: readonly SpectralPeak[] | undefined;
  /** Constant offset of water and fat from the resonance frequency, Hz. */
  readonly offResonanceHz?: number | undefined;
  /** How the off-resonance grows along read and phase from the centre, Hz per mm: a shim that is off. */
  readonly fieldSlopeHzPerMm?: { readonly x: number; readonly y: number } | undefined;
  /** Share of the readout that is acquired, 0.5 to 1: the part before the echo is cut, in reversed echoes the same k. */
  readonly partialEcho?: number | undefined;
  /** Share of the lines that is acquired, 0.5 to 1: the first lines are left out. */
  readonly partialFourier?: number | undefined;
  readonly noise?: NoiseOptions | undefined;
  /** Centre of the stack, patient coordinates (LPS). */
  readonly positionMm?: readonly [number, number, number] | undefined;
  /** Turns of read, phase and slice direction about the patient's x, then y, then z axis, degrees. */
  readonly rotationDegrees?: readonly [number, number, number] | undefined;
  /** Integer in [0, 2^32): chooses the noise. */
  readonly seed?: number | undefined;
}

export interface NoiseOptions {
  /**
   * Standard deviation of the real and imaginary part of an image sample of coil 0, in units of the image of an object
   * of intensity 1. 0: no noise.
   */
  readonly sigma?: number | undefined;
  /** `E[n n^H]` of one image sample, [coil, coil] interleaved re, im; instead of `sigma`. */
  readonly covariance?: Float64Array | undefined;
  /** Noise readouts before the first image readout. */
  readonly readouts?: number | undefined;
  readonly samplesPerReadout?: number | undefined;
  /** Dwell time of the noise readouts. Default: that of the image readouts. */
  readonly dwellSeconds?: number | undefined;
  /** Share of 1/dwell that the receiver's filter lets through to the noise readouts; stated in the header. */
  readonly relativeReceiverNoiseBandwidth?: number | undefined;
}
