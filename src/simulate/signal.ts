import { spectrumSignal } from "../physics/chemical-shift.js";
import { type Acquisition, acquiredLines, acquiredSamples, centerSample } from "./acquisition.js";
import { addEllipseSpectrum, type Ellipse, scaleEllipses } from "./ellipse.js";
import { sliceOffsetMm } from "./geometry.js";
import { phantomSlice } from "./phantom.js";
import { ringSensitivities, type Sensitivities } from "./sensitivity.js";

/** Lines are kept for repetitions and averages up to this many bytes in all; beyond, they are computed again. */
const CACHE_BYTES = 256 * 2 ** 20;

/** One line of k-space before any phase evolves: [coil, sample] interleaved, samples by ascending k. */
export interface TissueLine {
  readonly water: Float64Array;
  readonly fat: Float64Array | undefined;
}

/**
 * Exact k-space of the phantom seen by the coils, `s(k) = scale sum_r rho(r) C(r) exp(-i 2 pi k.r)`.
 * The scale makes a region of intensity 1 (and sensitivity 1) appear at the level 1 in the image that a centred
 * unitary inverse transform of the whole encoded grid gives: sqrt(Nx Ny) / (FOVx FOVy), encoded lengths.
 */
export class ExactKSpace {
  readonly #acquisition: Acquisition;
  readonly #coils: Sensitivities;
  readonly #scale: number;
  readonly #cache: Map<number, TissueLine> | undefined;
  readonly #hasSlope: boolean;
  readonly #echoes: number;

  constructor(acquisition: Acquisition) {
    const a = acquisition;
    this.#acquisition = a;
    this.#coils = ringSensitivities(a.coils, Math.max(a.fovMm.x, a.fovMm.y));
    const areaMm2 = a.fovMm.x * a.readoutOversampling * a.fovMm.y;
    this.#scale = Math.sqrt(a.encodedSamples * a.matrix.y) / areaMm2;
    const { x, y } = a.fieldSlopeHzPerMm;
    this.#hasSlope = x !== 0 || y !== 0;
    this.#echoes = a.echoTimesSeconds.length;
    const bytes = 2 * 16 * a.coils * acquiredSamples(a) * acquiredLines(a) * a.sliceOrder.length;
    const asked = a.repetitions * a.averages;
    this.#cache = asked > 1 && bytes <= CACHE_BYTES ? new Map() : undefined;
  }

  /** @param line counter of the line, 0 for the first that is acquired */
  line(slice: number, line: number, echo: number): TissueLine {
    const key =
      (slice * acquiredLines(this.#acquisition) + line) * this.#echoes + (this.#hasSlope ? echo : 0);
    const known = this.#cache?.get(key);
    if (known) return known;
    const computed = this.#compute(slice, line, echo);
    this.#cache?.set(key, computed);
    return computed;
  }

  #compute(slice: number, line: number, echo: number): TissueLine {
    const a = this.#acquisition;
    const halfSizeMm = a.phantomSizeMm / 2;
    const tissues = phantomSlice(a.phantom, sliceOffsetMm(a, slice) / halfSizeMm);
    const kx = Float64Array.from(
      { length: acquiredSamples(a) },
      (_, i) => (a.firstSample + i - Math.floor(a.encodedSamples / 2)) / (a.fovMm.x * a.readoutOversampling),
    );
    const ky = (a.firstLine + line - Math.floor(a.matrix.y / 2)) / a.fovMm.y;
    const [samplesX, samplesY] = this.#hasSlope ? sloped(a, kx, ky, echo) : [kx, ky];
    const seen = (part: readonly Ellipse[]) =>
      this.#seenByCoils(scaleEllipses(part, halfSizeMm), samplesX, samplesY);
    return { water: seen(tissues.water), fat: tissues.fat.length > 0 ? seen(tissues.fat) : undefined };
  }

  #seenByCoils(ellipses: readonly Ellipse[], kx: Float64Array, ky: number | Float64Array): Float64Array {
    const { coils, terms, weights } = this.#coils;
    const samples = kx.length;
    const result = new Float64Array(2 * coils * samples);
    for (const [j, { qx, qy }] of terms.entries()) {
      const shifted = new Float64Array(2 * samples);
      addEllipseSpectrum(
        ellipses,
        kx.map((k) => k - qx),
        typeof ky === "number" ? ky - qy : ky.map((k) => k - qy),
        shifted,
        this.#scale,
      );
      for (let coil = 0; coil < coils; coil++) {
        const w = 2 * (coil * terms.length + j);
        addWeighted(result, 2 * coil * samples, shifted, weights[w] ?? 0, weights[w + 1] ?? 0);
      }
    }
    return result;
  }
}

/**
 * A field that grows evenly moves the samples in k-space: `exp(-i 2 pi g.r tau)` is the sample at `k + g tau`. A sample's
 * time is that of its echo, plus or minus the dwell time for each step from k = 0.
 */
function sloped(
  a: Acquisition,
  kx: Float64Array,
  ky: number,
  echo: number,
): [kx: Float64Array, ky: Float64Array] {
  const center = Math.floor(a.encodedSamples / 2) - a.firstSample;
  const sign = a.reversed[echo] ? -1 : 1;
  const seconds = kx.map((_, i) => a.echoTimesSeconds[echo]! + sign * (i - center) * a.dwellSeconds);
  const { x, y } = a.fieldSlopeHzPerMm;
  return [kx.map((k, i) => k + x * seconds[i]!), seconds.map((time) => ky + y * time)];
}

/** What time does to the samples of one echo, in the order in which they are stored. */
export interface EchoPhases {
  readonly reversed: boolean;
  readonly water: Float64Array;
  readonly fat: Float64Array;
}

/**
 * The factors `exp(-i 2 pi df tau)` of water and `sum share exp(-i 2 pi (df + df_peak) tau)` of fat; tau is the time of
 * the sample since the excitation: the echo time at the stored centre sample, one dwell time more for each later one.
 */
export function echoPhases(a: Acquisition, echo: number): EchoPhases {
  const samples = acquiredSamples(a);
  const water = new Float64Array(2 * samples);
  const fat = new Float64Array(2 * samples);
  const center = centerSample(a, echo);
  const echoSeconds = a.echoTimesSeconds[echo] ?? 0;
  for (let i = 0; i < samples; i++) {
    const seconds = echoSeconds + (i - center) * a.dwellSeconds;
    const angle = -2 * Math.PI * a.offResonanceHz * seconds;
    const [re, im] = [Math.cos(angle), Math.sin(angle)];
    const [fatRe, fatIm] = spectrumSignal(a.fatSpectrum, a.resonanceHz, seconds);
    water.set([re, im], 2 * i);
    fat.set([re * fatRe - im * fatIm, re * fatIm + im * fatRe], 2 * i);
  }
  return { reversed: a.reversed[echo] ?? false, water, fat };
}

/** Noise-free samples of one readout, [coil, sample] interleaved, in the order of time. */
export function readoutSignal(line: TissueLine, phases: EchoPhases, coils: number): Float64Array {
  const result = new Float64Array(line.water.length);
  addEvolved(result, line.water, phases.water, phases.reversed, coils);
  if (line.fat) addEvolved(result, line.fat, phases.fat, phases.reversed, coils);
  return result;
}

function addEvolved(
  result: Float64Array,
  line: Float64Array,
  phases: Float64Array,
  reversed: boolean,
  coils: number,
): void {
  const samples = phases.length / 2;
  for (let coil = 0; coil < coils; coil++) {
    for (let i = 0; i < samples; i++) {
      const from = 2 * (coil * samples + (reversed ? samples - 1 - i : i));
      const to = 2 * (coil * samples + i);
      const re = line[from]!;
      const im = line[from + 1]!;
      const c = phases[2 * i]!;
      const s = phases[2 * i + 1]!;
      result[to]! += re * c - im * s;
      result[to + 1]! += re * s + im * c;
    }
  }
}

function addWeighted(result: Float64Array, at: number, values: Float64Array, re: number, im: number): void {
  for (let i = 0; i < values.length; i += 2) {
    const a = values[i]!;
    const b = values[i + 1]!;
    result[at + i]! += a * re - b * im;
    result[at + i + 1]! += a * im + b * re;
  }
}
