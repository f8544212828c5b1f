/**
 * Receive sensitivities of which the product with an object still has an exact k-space: each is a short sum of complex
 * exponentials, `C(r) = sum_j w_j exp(i 2 pi q_j.r)`, so coil k-space is `sum_j w_j F(k - q_j)`.
 */
export interface Sensitivities {
  readonly coils: number;
  /** The spatial frequencies q_j, cycles/mm, common to all coils. */
  readonly terms: readonly { readonly qx: number; readonly qy: number }[];
  /** Weights w_j, interleaved re, im, [coil, term]. */
  readonly weights: Float64Array;
}

/**
 * Coils on a ring, each brighter and of another phase on its own side; their root sum of squares is 1 at the centre.
 * Coil c at the angle t_c = 2 pi c / n + 0.3 has `exp(i t_c) g(x, cos t_c) g(y, sin t_c)` with
 * `g(x, u) = 1 + u (0.8 sin(pi x / L) + 0.4 i cos(pi x / L))`: |g| between 0.2 and 1.8 for |x| <= L/2, never 0.
 * A single coil is 1 everywhere.
 * @param lengthMm L, the side of the square that the ring looks into
 */
export function ringSensitivities(coils: number, lengthMm: number): Sensitivities {
  if (coils === 1) return { coils, terms: [{ qx: 0, qy: 0 }], weights: Float64Array.of(1, 0) };
  const steps = [-1, 0, 1];
  const q = 1 / (2 * lengthMm);
  const terms = steps.flatMap((sy) => steps.map((sx) => ({ qx: sx * q, qy: sy * q })));
  const weights = new Float64Array(2 * coils * terms.length);
  const angles = Array.from({ length: coils }, (_, c) => (2 * Math.PI * c) / coils + 0.3);
  let centre = 0; // sum over coils of |C(0)|^2
  for (const t of angles) centre += (1 + 0.16 * Math.cos(t) ** 2) * (1 + 0.16 * Math.sin(t) ** 2);
  let at = 0;
  for (const t of angles) {
    for (const sy of steps) {
      for (const sx of steps) {
        // The weights of exp(+-i pi x / L) in g are purely imaginary: 0.4 u i (1/2 -+ 1).
        const gx = lobeWeight(sx, Math.cos(t));
        const gy = lobeWeight(sy, Math.sin(t));
        const re = gx.re * gy.re - gx.im * gy.im;
        const im = gx.re * gy.im + gx.im * gy.re;
        weights[at++] = (re * Math.cos(t) - im * Math.sin(t)) / Math.sqrt(centre);
        weights[at++] = (re * Math.sin(t) + im * Math.cos(t)) / Math.sqrt(centre);
      }
    }
  }
  return { coils, terms, weights };
}

function lobeWeight(step: number, u: number): { re: number; im: number } {
  return step === 0 ? { re: 1, im: 0 } : { re: 0, im: 0.4 * u * (0.5 - step) };
}

/** Sensitivity of one coil at a point in mm. */
export function sensitivityAt(
  s: Sensitivities,
  coil: number,
  xMm: number,
  yMm: number,
): { re: number; im: number } {
  let re = 0;
  let im = 0;
  for (const [j, { qx, qy }] of s.terms.entries()) {
    const angle = 2 * Math.PI * (qx * xMm + qy * yMm);
    const at = 2 * (coil * s.terms.length + j);
    const [wr = 0, wi = 0] = s.weights.subarray(at, at + 2);
    re += wr * Math.cos(angle) - wi * Math.sin(angle);
    im += wr * Math.sin(angle) + wi * Math.cos(angle);
  }
  return { re, im };
}
