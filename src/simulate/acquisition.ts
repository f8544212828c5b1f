import { UsageError } from "../errors.js";
import { choleskyFactor } from "../kernels/linear-algebra.js";
import { FAT_SPECTRUM, type SpectralPeak } from "../physics/chemical-shift.js";
import { larmorHz } from "../physics/larmor.js";
import { defaultCovariance, isHermitian } from "./noise.js";
import type { AcquisitionOptions, NoiseOptions } from "./options.js";
import { PHANTOMS, type PhantomName } from "./phantom.js";

/** Counters and sample numbers are 16-bit in the raw-data standard. */
const LARGEST_COUNT = 65535;
/** The head's channel mask has 16 words of 64 bits. */
const MOST_COILS = 1024;

/** An acquisition with every choice made and checked. */
export interface Acquisition {
  readonly phantom: PhantomName;
  readonly phantomSizeMm: number;
  readonly matrix: { readonly x: number; readonly y: number };
  readonly fovMm: { readonly x: number; readonly y: number };
  readonly readoutOversampling: number;
  /** Length of the encoded readout, matrix.x times oversampling. */
  readonly encodedSamples: number;
  /** First encoded sample and line that are acquired. */
  readonly firstSample: number;
  readonly firstLine: number;
  readonly coils: number;
  /** Slice counters in the order of acquisition. */
  readonly sliceOrder: readonly number[];
  readonly sliceSpacingMm: number;
  readonly sliceThicknessMm: number;
  readonly echoTimesSeconds: readonly number[];
  readonly reversed: readonly boolean[];
  readonly repetitions: number;
  readonly averages: number;
  readonly dwellSeconds: number;
  readonly fieldT: number;
  /** Whole Hz, as the header states it. */
  readonly resonanceHz: number;
  readonly fatSpectrum: readonly SpectralPeak[];
  readonly offResonanceHz: number;
  readonly fieldSlopeHzPerMm: { readonly x: number; readonly y: number };
  readonly noise: NoiseModel;
  readonly positionMm: readonly [number, number, number];
  readonly rotationDegrees: readonly [number, number, number];
  readonly seed: number;
}

export interface NoiseModel {
  /** `E[n n^H]` of one image sample, [coil, coil] interleaved. */
  readonly covariance: Float64Array;
  /** Its Cholesky factor; undefined where there is no noise. */
  readonly factor: Float64Array | undefined;
  readonly readouts: number;
  readonly samplesPerReadout: number;
  readonly dwellSeconds: number;
  readonly relativeReceiverNoiseBandwidth: number;
}

/**
 * Fill in the defaults and check everything.
 * @throws UsageError naming the option
 */
export function resolveAcquisition(options: AcquisitionOptions): Acquisition {
  const matrix = {
    x: count("matrix.x", options.matrix?.x, 128),
    y: count("matrix.y", options.matrix?.y, 128),
  };
  const fovMm = {
    x: positive("fovMm.x", options.fovMm?.x, 256),
    y: positive("fovMm.y", options.fovMm?.y, 256),
  };
  const readoutOversampling = positive("readoutOversampling", options.readoutOversampling, 2);
  const encodedSamples = count("matrix.x times readoutOversampling", matrix.x * readoutOversampling, 0);
  if (encodedSamples < matrix.x)
    throw new UsageError({ field: "readoutOversampling", value: readoutOversampling }, "must be at least 1");
  const coils = count("coils", options.coils, 4, MOST_COILS);
  const dwellSeconds = positive("dwellSeconds", options.dwellSeconds, 10e-6);
  const fieldT = positive("fieldT", options.fieldT, 1.5);
  const sliceThicknessMm = positive("sliceThicknessMm", options.sliceThicknessMm, 5);
  const echoTimesSeconds = options.echoTimesSeconds ?? [5e-3];
  count("number of echoTimesSeconds", echoTimesSeconds.length, 1);
  const acquisition: Acquisition = {
    phantom: phantomName(options.phantom ?? "belfry"),
    phantomSizeMm: positive("phantomSizeMm", options.phantomSizeMm, Math.min(fovMm.x, fovMm.y)),
    matrix,
    fovMm,
    readoutOversampling,
    encodedSamples,
    firstSample: leftOut("partialEcho", encodedSamples, options.partialEcho),
    firstLine: leftOut("partialFourier", matrix.y, options.partialFourier),
    coils,
    sliceOrder: orderOf(count("slices", options.slices, 3), options.sliceOrder ?? "interleaved"),
    sliceSpacingMm: positive("sliceSpacingMm", options.sliceSpacingMm, sliceThicknessMm * 1.2),
    sliceThicknessMm,
    echoTimesSeconds,
    reversed: reversedEchoes(options.reversedEchoes ?? "none", echoTimesSeconds.length),
    repetitions: count("repetitions", options.repetitions, 1),
    averages: count("averages", options.averages, 1),
    dwellSeconds,
    fieldT,
    resonanceHz: Math.round(larmorHz(fieldT)),
    fatSpectrum: options.fatSpectrum ?? FAT_SPECTRUM,
    offResonanceHz: finite("offResonanceHz", options.offResonanceHz ?? 0),
    fieldSlopeHzPerMm: {
      x: finite("fieldSlopeHzPerMm.x", options.fieldSlopeHzPerMm?.x ?? 0),
      y: finite("fieldSlopeHzPerMm.y", options.fieldSlopeHzPerMm?.y ?? 0),
    },
    noise: resolveNoise(options.noise ?? {}, coils, dwellSeconds),
    positionMm: finiteTriple("positionMm", options.positionMm ?? [0, 0, 0]),
    rotationDegrees: finiteTriple("rotationDegrees", options.rotationDegrees ?? [0, 0, 0]),
    seed: seedOf(options.seed ?? 1),
  };
  for (const peak of acquisition.fatSpectrum) {
    finite("fatSpectrum.ppm", peak.ppm);
    finite("fatSpectrum.share", peak.share);
  }
  checkEchoTimes(acquisition);
  return acquisition;
}

/** Position of k = 0 in the readout as it is stored, in the order of time. */
export function centerSample(a: Acquisition, echo: number): number {
  const forward = Math.floor(a.encodedSamples / 2) - a.firstSample;
  return a.reversed[echo] ? acquiredSamples(a) - 1 - forward : forward;
}

export function acquiredSamples(a: Acquisition): number {
  return a.encodedSamples - a.firstSample;
}

export function acquiredLines(a: Acquisition): number {
  return a.matrix.y - a.firstLine;
}

/** Number of image readouts. */
export function imageReadouts(a: Acquisition): number {
  return a.repetitions * a.averages * acquiredLines(a) * a.sliceOrder.length * a.echoTimesSeconds.length;
}

function resolveNoise(options: NoiseOptions, coils: number, imageDwellSeconds: number): NoiseModel {
  if (options.sigma !== undefined && options.covariance !== undefined)
    throw new UsageError({ field: "noise.sigma" }, "cannot be given together with noise.covariance");
  const sigma = finite("noise.sigma", options.sigma ?? 0.02);
  if (sigma < 0) throw new UsageError({ field: "noise.sigma", value: sigma }, "must be 0 or greater");
  const covariance = options.covariance ?? defaultCovariance(coils, sigma);
  if (covariance.length !== 2 * coils * coils)
    throw new UsageError(
      { field: "noise.covariance", value: covariance.length },
      `must have 2 x coils x coils = ${2 * coils * coils} numbers`,
    );
  const silent = sigma === 0 && options.covariance === undefined;
  const factor = silent || !isHermitian(covariance, coils) ? undefined : choleskyFactor(covariance, coils);
  if (!silent && !factor)
    throw new UsageError({ field: "noise.covariance" }, "must be Hermitian and positive definite");
  const readouts = options.readouts ?? (silent ? 0 : 16);
  if (readouts !== 0) count("noise.readouts", readouts, 0);
  if (silent && readouts > 0)
    throw new UsageError({ field: "noise.readouts", value: readouts }, "must be 0 where there is no noise");
  return {
    covariance,
    factor,
    readouts,
    samplesPerReadout: count("noise.samplesPerReadout", options.samplesPerReadout, 256),
    dwellSeconds: positive("noise.dwellSeconds", options.dwellSeconds, imageDwellSeconds),
    relativeReceiverNoiseBandwidth: positive(
      "noise.relativeReceiverNoiseBandwidth",
      options.relativeReceiverNoiseBandwidth,
      1,
    ),
  };
}

/** A readout cannot begin before the excitation. */
function checkEchoTimes(a: Acquisition): void {
  for (const [echo, seconds] of a.echoTimesSeconds.entries()) {
    const earliest = centerSample(a, echo) * a.dwellSeconds;
    if (!(seconds >= earliest && Number.isFinite(seconds)))
      throw new UsageError(
        { field: `echoTimesSeconds[${echo}]`, value: seconds },
        `must be at least ${Number(earliest.toPrecision(6))} s, the time from the first sample to k = 0`,
        "Give a later echo time, a shorter dwell time or a partial echo.",
      );
  }
}

function leftOut(field: string, length: number, fraction = 1): number {
  if (!(fraction >= 0.5 && fraction <= 1))
    throw new UsageError({ field, value: fraction }, "must be from 0.5 to 1");
  return length - Math.round(fraction * length);
}

function orderOf(slices: number, order: "interleaved" | "ascending"): number[] {
  const ascending = Array.from({ length: slices }, (_, s) => s);
  if (order === "ascending") return ascending;
  return [...ascending.filter((s) => s % 2 === 0), ...ascending.filter((s) => s % 2 === 1)];
}

function reversedEchoes(which: "none" | "odd" | "all", echoes: number): boolean[] {
  return Array.from({ length: echoes }, (_, e) => which === "all" || (which === "odd" && e % 2 === 1));
}

function phantomName(name: string): PhantomName {
  const known = PHANTOMS.find((phantom) => phantom === name);
  if (!known)
    throw new UsageError({ field: "phantom", value: name }, `must be one of ${PHANTOMS.join(", ")}`);
  return known;
}

function seedOf(seed: number): number {
  if (!Number.isInteger(seed) || seed < 0 || seed >= 2 ** 32)
    throw new UsageError({ field: "seed", value: seed }, "must be a whole number from 0 to 4294967295");
  return seed;
}

function count(field: string, value: number | undefined, fallback: number, most = LARGEST_COUNT): number {
  const n = value ?? fallback;
  if (!Number.isInteger(n) || n < 1 || n > most)
    throw new UsageError({ field, value: n }, `must be a whole number from 1 to ${most}`);
  return n;
}

function positive(field: string, value: number | undefined, fallback: number): number {
  const n = value ?? fallback;
  if (!(n > 0 && Number.isFinite(n))) throw new UsageError({ field, value: n }, "must be greater than 0");
  return n;
}

function finite(field: string, value: number): number {
  if (!Number.isFinite(value)) throw new UsageError({ field, value }, "must be a finite number");
  return value;
}

function finiteTriple(
  field: string,
  value: readonly [number, number, number],
): readonly [number, number, number] {
  for (const n of value) finite(field, n);
  return value;
}
