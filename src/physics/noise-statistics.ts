/**
 * Noise of magnitude images: the root sum of squares (RSS) of n channels with independent complex Gaussian noise
 * of standard deviation `sigma` in each of the real and imaginary parts. One channel is the Rician case.
 *
 * Sources: Constantinides, Atalar, McVeigh 1997, Magn Reson Med 38:852 (n channels);
 * Gudbjartsson, Patz 1995, Magn Reson Med 34:910 (one channel).
 */

/** Mean of the RSS of `channels` without signal: `sqrt(2) Gamma(n + 1/2) / Gamma(n) sigma`. */
export function rssNoiseMean(channels: number, sigma = 1): number {
  // Gamma(n + 1/2) / Gamma(n) = sqrt(pi)/2 * prod_{k=1}^{n-1} (k + 1/2) / k
  let ratio = Math.sqrt(Math.PI / 2);
  for (let k = 1; k < channels; k++) ratio *= (k + 0.5) / k;
  return ratio * sigma;
}

/** Root mean square of the RSS of `channels` with true signal `signal`: `sqrt(A^2 + 2 n sigma^2)`. */
export function rssRootMeanSquare(channels: number, sigma = 1, signal = 0): number {
  return Math.sqrt(signal * signal + 2 * channels * sigma * sigma);
}

/** Mean of the RSS of `channels` with true signal `signal` (RSS of the noise-free channels): `beta_n 1F1(-1/2; n; -A^2 / 2 sigma^2)`. */
export function rssMean(channels: number, sigma = 1, signal = 0): number {
  return rssNoiseMean(channels, sigma) * halfHypergeometric(channels, (signal / sigma) ** 2 / 2);
}

/** Standard deviation of the RSS of `channels` with true signal `signal`. */
export function rssStandardDeviation(channels: number, sigma = 1, signal = 0): number {
  const rms = rssRootMeanSquare(channels, sigma, signal);
  const mean = rssMean(channels, sigma, signal);
  return Math.sqrt((rms - mean) * (rms + mean));
}

/**
 * What carries a covariance measured by noise readouts to the image readouts:
 * `dwell_noise / dwell_image / relativeReceiverNoiseBandwidth`. The noise power of white noise goes with the
 * bandwidth 1/dwell; the receiver's filter passes only the relative noise bandwidth of it to the noise readouts.
 * Kellman, McVeigh 2005, Magn Reson Med 54:1439.
 */
export function noiseCovarianceFactor(
  noiseDwellSeconds: number,
  imageDwellSeconds: number,
  relativeReceiverNoiseBandwidth = 1,
): number {
  return noiseDwellSeconds / imageDwellSeconds / relativeReceiverNoiseBandwidth;
}

/** 1F1(-1/2; n; -z) for z >= 0. NIST DLMF 13.2.39 (Kummer) below z = 500, 13.7.2 (asymptotic) above. */
function halfHypergeometric(n: number, z: number): number {
  return z <= 500 ? kummerSeries(n, z) : asymptoticSeries(n, z);
}

/** exp(-z) 1F1(n + 1/2; n; z): all terms positive, so nothing cancels. */
function kummerSeries(n: number, z: number): number {
  let term = Math.exp(-z);
  let sum = term;
  for (let k = 0; k < z || term > 1e-17 * sum; k++) {
    term *= ((n + 0.5 + k) * z) / ((n + k) * (k + 1));
    sum += term;
  }
  return sum;
}

/** Gamma(n) / Gamma(n + 1/2) sqrt(z) sum_s (-1/2)_s (1/2 - n)_s / s! z^-s, up to its smallest term. */
function asymptoticSeries(n: number, z: number): number {
  let term = 1;
  let sum = 0;
  for (let s = 0; Math.abs(term) > 1e-17; s++) {
    sum += term;
    const next = (term * (s - 0.5) * (s + 0.5 - n)) / ((s + 1) * z);
    if (Math.abs(next) >= Math.abs(term)) break;
    term = next;
  }
  return (Math.SQRT2 / rssNoiseMean(n)) * Math.sqrt(z) * sum;
}
