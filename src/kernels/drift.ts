/**
 * Frequency by which a readout has drifted against an earlier one with the same gradients: what both went through drops
 * out of `sum_c conj(first) later`, whose phase falls by `2 pi drift dwell` from sample to sample. The slope is found from
 * neighbouring samples first, which cannot wrap below 1 / (2 dwell), and refined by the least squares line through
 * what is left, each sample weighted by its magnitude.
 *
 * Source: phase of navigator signals: Ehman and Felmlee 1989, Radiology 173:255; weighted linear fit as in least squares.
 * @param first, later interleaved complex64, [channel, sample], in the order of time
 * @returns Hz; positive where spins turn faster in the sense exp(-i 2 pi f t)
 * @throws RangeError when the lengths differ
 */
export function driftBetween(
  first: Float32Array,
  later: Float32Array,
  channels: number,
  dwellSeconds: number,
): number {
  if (first.length !== later.length) throw new RangeError(`${first.length} and ${later.length} floats`);
  const samples = first.length / (2 * channels);
  const product = hermitianProduct(first, later, channels, samples);
  let [re, im] = [0, 0];
  for (let i = 0; i + 3 < product.length; i += 2) {
    re += product[i]! * product[i + 2]! + product[i + 1]! * product[i + 3]!;
    im += product[i]! * product[i + 3]! - product[i + 1]! * product[i + 2]!;
  }
  const coarse = Math.atan2(im, re);
  return -(coarse + slopeLeft(product, coarse)) / (2 * Math.PI * dwellSeconds);
}

/** `sum_c conj(first) later` of each sample. */
function hermitianProduct(
  first: Float32Array,
  later: Float32Array,
  channels: number,
  samples: number,
): Float64Array {
  const out = new Float64Array(2 * samples);
  for (let c = 0, i = 0; c < channels; c++)
    for (let j = 0; j < 2 * samples; j += 2, i += 2) {
      out[j]! += first[i]! * later[i]! + first[i + 1]! * later[i + 1]!;
      out[j + 1]! += first[i]! * later[i + 1]! - first[i + 1]! * later[i]!;
    }
  return out;
}

/** Radians per sample that the phase still rises once a slope is taken off, about its mean phase. */
function slopeLeft(product: Float64Array, slope: number): number {
  const turned = Float64Array.from(product);
  let [re, im] = [0, 0];
  for (let j = 0, i = 0; i < turned.length; j++, i += 2) {
    const [c, s] = [Math.cos(slope * j), -Math.sin(slope * j)];
    turned[i] = product[i]! * c - product[i + 1]! * s;
    turned[i + 1] = product[i]! * s + product[i + 1]! * c;
    re += turned[i]!;
    im += turned[i + 1]!;
  }
  let [weights, first, second, moment, mean] = [0, 0, 0, 0, 0];
  for (let j = 0, i = 0; i < turned.length; j++, i += 2) {
    const weight = Math.hypot(turned[i]!, turned[i + 1]!);
    const phase = Math.atan2(turned[i + 1]! * re - turned[i]! * im, turned[i]! * re + turned[i + 1]! * im);
    weights += weight;
    first += weight * j;
    second += weight * j * j;
    mean += weight * phase;
    moment += weight * j * phase;
  }
  const spread = weights * second - first * first;
  return spread > 0 ? (weights * moment - first * mean) / spread : 0;
}
