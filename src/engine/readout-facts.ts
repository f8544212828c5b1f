import { coverageOf } from "../ingest/coverage.js";
import { slicePositionMm } from "../ingest/scan-facts.js";
import {
  bandwidthPerPixelHz,
  readoutBandwidthHz,
  readoutDurationSeconds,
  readoutGradientTPerM,
} from "../physics/bandwidth.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM, shiftPixels } from "../physics/chemical-shift.js";
import type { Scan } from "./scan.js";

/** What a scan is, in the numbers that people ask for; `inspect` shows it and the sidecar keeps it. */
export function readoutFacts(scan: Scan) {
  const { facts, index } = scan;
  const { encoded, reconstructed, dwellSeconds } = facts;
  const coverage = coverageOf(index, facts);
  const bandwidthHz = readoutBandwidthHz(dwellSeconds);
  const perPixelHz = bandwidthPerPixelHz(encoded.matrix.x, dwellSeconds);
  const fatHz = chemicalShiftHz(FAT_MAIN_PEAK_PPM, facts.resonanceHz);
  const fatPixels = shiftPixels(fatHz, perPixelHz);
  const pixelMm = encoded.fovMm.x / encoded.matrix.x;
  return {
    encoding: facts.encoding,
    trajectory: facts.trajectory,
    dimensions: facts.dimensions,
    encodedSpace: encoded,
    reconstructedSpace: reconstructed,
    oversampling: {
      x: encoded.fovMm.x / reconstructed.fovMm.x,
      y: encoded.fovMm.y / reconstructed.fovMm.y,
      z: encoded.fovMm.z / reconstructed.fovMm.z,
    },
    partialFourier: coverage.partialFourier,
    phaseResolution: coverage.phaseResolution,
    acceleration: facts.acceleration,
    ...(facts.calibrationMode !== undefined && { calibrationMode: facts.calibrationMode }),
    lines: {
      range: index.ranges.kspace_encode_step_1,
      partitions: index.ranges.kspace_encode_step_2,
      expected: coverage.expected,
      missing: coverage.missing,
      duplicates: coverage.duplicates,
      allZero: index.allZero,
      coverage: coverage.kind,
    },
    echoes: facts.lengths.contrast,
    echoTimesMs: facts.echoTimesSeconds.map((seconds) => seconds * 1e3),
    readoutDirections: facts.polarity,
    slices: facts.lengths.slice,
    sliceOrder: facts.sliceOrder,
    slicePositionsMm: facts.sliceOrder.map((slice) => {
      const pose = facts.poses[slice];
      return pose ? slicePositionMm(pose, pose.sliceDir) : null;
    }),
    repetitions: facts.lengths.repetition,
    sets: facts.lengths.set,
    phases: facts.lengths.phase,
    averages: facts.averages,
    channels: facts.channels,
    fieldT: facts.fieldT ?? null,
    resonanceHz: facts.resonanceHz,
    dwellSeconds,
    bandwidthHz,
    bandwidthPerPixelHz: perPixelHz,
    readoutDurationSeconds: readoutDurationSeconds(encoded.matrix.x, dwellSeconds),
    readoutGradientTPerM: readoutGradientTPerM(bandwidthHz, encoded.fovMm.x * 1e-3),
    fatWaterShift: { ppm: FAT_MAIN_PEAK_PPM, hz: fatHz, pixels: fatPixels, mm: fatPixels * pixelMm },
    relativeReceiverNoiseBandwidth: facts.relativeReceiverNoiseBandwidth,
    readouts: index.roles,
  };
}

export type ReadoutFacts = ReturnType<typeof readoutFacts>;
