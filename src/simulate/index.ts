import { bandwidthPerPixelHz } from "../physics/bandwidth.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM, shiftPixels } from "../physics/chemical-shift.js";
import { acquire } from "./acquire.js";
import { type Acquisition, acquiredSamples, imageReadouts, resolveAcquisition } from "./acquisition.js";
import { type ExpectedImage, expectedImageOf } from "./expected-image.js";
import { type SliceGeometry, sliceGeometry } from "./geometry.js";
import { headerXml } from "./header.js";
import type { AcquisitionOptions } from "./options.js";
import { type WriteOptions, writeRaw } from "./raw-writer.js";

export type { ExpectedImage } from "./expected-image.js";
export type { SliceGeometry } from "./geometry.js";
export type { AcquisitionOptions, NoiseOptions } from "./options.js";
export { PHANTOMS, type PhantomName } from "./phantom.js";

export interface SimulateOptions extends AcquisitionOptions, WriteOptions {
  /** The raw-data file to write. */
  readonly file: string;
}

/** What is true of a simulated file. */
export interface SimulationFacts {
  readonly phantom: string;
  readonly seed: number;
  readonly imageReadouts: number;
  readonly noiseReadouts: number;
  readonly samplesPerReadout: number;
  readonly encodedSamples: number;
  readonly resonanceHz: number;
  /** Unchanged by cropping the oversampling. */
  readonly bandwidthPerPixelHz: number;
  /** Displacement of fat's main peak along read_dir in a forward echo, pixels. */
  readonly fatShiftPixels: number;
  /** Displacement by the constant off-resonance in a forward echo, pixels. */
  readonly offResonanceShiftPixels: number;
  /** `E[n n^H]` of one image sample, [coil, coil] interleaved re, im. */
  readonly noiseCovariance: Float64Array;
  /** By slice counter. */
  readonly slices: readonly SliceGeometry[];
}

/**
 * Simulate an acquisition of a numerical phantom and write it as a raw-data file. The same options give the same bytes.
 * @throws UsageError naming a wrong option; OutputError if the file exists or cannot be written
 */
export async function simulateRaw(
  options: SimulateOptions,
): Promise<{ readonly file: string; readonly facts: SimulationFacts }> {
  const acquisition = resolveAcquisition(options);
  const count = acquisition.noise.readouts + imageReadouts(acquisition);
  await writeRaw(options.file, headerXml(acquisition), count, acquire(acquisition), options);
  return { file: options.file, facts: factsOf(acquisition) };
}

/**
 * The noise-free images that a file of these options should give.
 * @throws UsageError naming a wrong option
 */
export function expectedImage(options: AcquisitionOptions): ExpectedImage {
  return expectedImageOf(resolveAcquisition(options));
}

function factsOf(a: Acquisition): SimulationFacts {
  const pixelHz = bandwidthPerPixelHz(a.encodedSamples, a.dwellSeconds);
  return {
    phantom: a.phantom,
    seed: a.seed,
    imageReadouts: imageReadouts(a),
    noiseReadouts: a.noise.readouts,
    samplesPerReadout: acquiredSamples(a),
    encodedSamples: a.encodedSamples,
    resonanceHz: a.resonanceHz,
    bandwidthPerPixelHz: pixelHz,
    fatShiftPixels: shiftPixels(chemicalShiftHz(FAT_MAIN_PEAK_PPM, a.resonanceHz), pixelHz),
    offResonanceShiftPixels: shiftPixels(a.offResonanceHz, pixelHz),
    noiseCovariance: a.noise.covariance,
    slices: a.sliceOrder.map((_, slice) => sliceGeometry(a, slice)),
  };
}
