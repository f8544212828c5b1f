/**
 * sin(pi x) / (pi x), 1 at x = 0.
 * @param x dimensionless
 */
export function sinc(x: number): number {
  const angle = Math.PI * x;
  return angle === 0 ? 1 : Math.sin(angle) / angle;
}

/**
 * Modified Bessel function of the first kind, order 0: `sum_m ((x/2)^m / m!)^2`.
 * All terms are positive, so nothing cancels and the relative error stays near 1e-15; above |x| = 713 it overflows.
 * @param x dimensionless
 * Source: Abramowitz and Stegun, Handbook of Mathematical Functions (1964), 9.6.12.
 */
export function besselI0(x: number): number {
  const quarter = (x * x) / 4;
  let term = 1;
  let sum = 1;
  for (let m = 1; term > sum * 1e-17; m++) {
    term *= quarter / (m * m);
    sum += term;
  }
  return sum;
}
