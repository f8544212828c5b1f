/**
 * Water and fat in k-space: sample k of echo e was taken at its own time `tau = TE + sign k dwell`, so it holds
 * `W(k) + F(k) c(tau)` with `c(tau) = sum share exp(-i 2 pi offset tau)`, up to the field. Solving each k separately
 * puts fat back to its true place, whatever the direction of reading.
 *
 * Source: Reeder, Hargreaves, Yu, Brittain 2005, Magn Reson Med 54:636, doi:10.1002/mrm.20624 (least squares);
 * Brodsky, Holmes, Yu, Reeder 2008, Magn Reson Med 59:1151, doi:10.1002/mrm.21580 (k-space, exact sampling times);
 * Yu et al. 2008, Magn Reson Med 60:1122, doi:10.1002/mrm.21737 (several fat peaks).
 */
export interface SpectralLine {
  /** Hz from water; negative below it. */
  readonly offsetHz: number;
  /** The shares of a spectrum add up to 1. */
  readonly share: number;
}

export interface EchoTiming {
  /** Time of k = 0, seconds since the off-resonance phase was zero. */
  readonly echoSeconds: readonly number[];
  /** Hz per pixel along x, one for each echo; negative where it was read backwards; Infinity: all k at the echo time. */
  readonly pixelBandwidthHz: readonly number[];
}

export interface FatWaterModel {
  readonly echoes: number;
  readonly length: number;
  readonly timing: EchoTiming;
  /** Sampling time of each k, seconds, [echoes, length]. */
  readonly times: Float64Array;
  /** Signal of unit fat, interleaved complex, [echoes, length]. */
  readonly fat: Float64Array;
  /** Least squares inverse, interleaved complex, [length, 2 (water, fat), echoes]. */
  readonly inverse: Float64Array;
  /**
   * Combinations of three echoes in which water and fat cancel, of unit norm, smooth along k: interleaved complex,
   * [echoes - 2, length, 3]; number t takes the echoes t, t + 1, t + 2. What they leave is noise and a wrong field.
   */
  readonly residual: Float64Array;
  /** Root of the mean over k of the noise variance of water and of fat, for unit noise in an echo. */
  readonly noiseGain: { readonly water: number; readonly fat: number };
}

/** `sum share exp(-i 2 pi offset t)`. */
export function fatSignal(lines: readonly SpectralLine[], seconds: number): [re: number, im: number] {
  let re = 0;
  let im = 0;
  for (const { offsetHz, share } of lines) {
    const angle = -2 * Math.PI * offsetHz * seconds;
    re += share * Math.cos(angle);
    im += share * Math.sin(angle);
  }
  return [re, im];
}

/**
 * @param length   pixels along x (k samples)
 * @param damping  added to the normal equations, relative to one echo's energy; keeps k finite at which the echoes tell
 *   water and fat apart badly, at the price of a bias of about its size there
 * @throws RangeError for fewer than two echoes or unequal numbers of times and bandwidths
 */
export function fatWaterModel(
  timing: EchoTiming,
  lines: readonly SpectralLine[],
  length: number,
  damping = 1e-4,
): FatWaterModel {
  const { echoSeconds, pixelBandwidthHz } = timing;
  const echoes = echoSeconds.length;
  if (echoes < 2 || pixelBandwidthHz.length !== echoes) {
    throw new RangeError(
      `${echoes} echo times and ${pixelBandwidthHz.length} bandwidths; needs 2 or more of each`,
    );
  }
  const times = new Float64Array(echoes * length);
  const fat = new Float64Array(2 * echoes * length);
  for (let e = 0; e < echoes; e++) {
    for (let k = 0; k < length; k++) {
      const i = e * length + k;
      times[i] = echoSeconds[e]! + (k - Math.floor(length / 2)) / (length * pixelBandwidthHz[e]!);
      [fat[2 * i], fat[2 * i + 1]] = fatSignal(lines, times[i]!);
    }
  }
  const inverse = new Float64Array(4 * echoes * length);
  const residual = new Float64Array(6 * Math.max(0, echoes - 2) * length);
  const noise = [0, 0];
  for (let k = 0; k < length; k++) {
    invertSample(fat, echoes, length, k, damping, inverse, noise);
    for (let t = 0; t + 2 < echoes; t++) cancelTriple(fat, length, t, k, residual);
  }
  const [water, fatGain] = noise.map((sum) => Math.sqrt(sum / length)) as [number, number];
  return { echoes, length, timing, times, fat, inverse, residual, noiseGain: { water, fat: fatGain } };
}

/** A sample of k that does not tell the species apart at all counts with this variance. */
const MOST_VARIANCE = 100;

/**
 * Noise of the noisier species against one echo if nothing were damped, root of the mean over k: how well the echo times
 * tell water from fat. Near 1 for good ones.
 */
export function separationNoise({ fat, echoes, length }: FatWaterModel): number {
  let sum = 0;
  for (let k = 0; k < length; k++) {
    let [re, im, energy] = [0, 0, 0];
    for (let e = 0; e < echoes; e++) {
      const [a, b] = [fat[2 * (e * length + k)]!, fat[2 * (e * length + k) + 1]!];
      re += a;
      im += b;
      energy += a * a + b * b;
    }
    const variance = Math.max(energy, echoes) / (echoes * energy - re * re - im * im);
    sum += variance > 0 && variance < MOST_VARIANCE ? variance : MOST_VARIANCE;
  }
  return Math.sqrt(sum / length);
}

/** `(A^H A + damping)^-1 A^H` for the columns 1 and c(tau_e). */
function invertSample(
  fat: Float64Array,
  echoes: number,
  length: number,
  k: number,
  damping: number,
  inverse: Float64Array,
  noise: number[],
): void {
  let [re, im, energy] = [0, 0, damping];
  for (let e = 0; e < echoes; e++) {
    const [a, b] = [fat[2 * (e * length + k)]!, fat[2 * (e * length + k) + 1]!];
    re += a;
    im += b;
    energy += a * a + b * b;
  }
  const total = echoes + damping;
  const determinant = total * energy - re * re - im * im;
  for (let e = 0; e < echoes; e++) {
    const [a, b] = [fat[2 * (e * length + k)]!, -fat[2 * (e * length + k) + 1]!]; // conj(c)
    const water = 2 * (2 * k * echoes + e);
    const fatAt = water + 2 * echoes;
    inverse[water] = (energy - (re * a - im * b)) / determinant;
    inverse[water + 1] = -(re * b + im * a) / determinant;
    inverse[fatAt] = (total * a - re) / determinant;
    inverse[fatAt + 1] = (total * b + im) / determinant;
    noise[0]! += inverse[water]! ** 2 + inverse[water + 1]! ** 2;
    noise[1]! += inverse[fatAt]! ** 2 + inverse[fatAt + 1]! ** 2;
  }
}

/** The vector product of (1, 1, 1) and (c0, c1, c2): c2 - c1, c0 - c2, c1 - c0, to unit norm. */
function cancelTriple(
  fat: Float64Array,
  length: number,
  first: number,
  k: number,
  residual: Float64Array,
): void {
  const at = 6 * (first * length + k);
  let norm = 0;
  for (let j = 0; j < 3; j++) {
    const plus = 2 * ((first + ((j + 2) % 3)) * length + k);
    const minus = 2 * ((first + ((j + 1) % 3)) * length + k);
    for (let part = 0; part < 2; part++) {
      residual[at + 2 * j + part] = fat[plus + part]! - fat[minus + part]!;
      norm += residual[at + 2 * j + part]! ** 2;
    }
  }
  const gain = 1 / Math.sqrt(norm + 1e-6); // a triple of equal fat signals cancels everything and says nothing
  for (let j = 0; j < 6; j++) residual[at + j]! *= gain;
}
