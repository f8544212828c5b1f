/**
 * `J1(x) / x` for x >= 0, J1 the Bessel function of the first kind of order 1; 1/2 at x = 0. Absolute error below 1e-15.
 *
 * Source: NIST DLMF 10.2.2 (series, x < 2), 3.6(ii) with 10.12.4 (backward recurrence, x < 25), 10.17.3 (asymptotic).
 */
export function besselJ1OverX(x: number): number {
  if (x < 2) return powerSeries(x);
  return (x < 25 ? backwardRecurrence(x) : asymptotic(x)) / x;
}

/** 1/2 sum_m (-x^2/4)^m / (m! (m+1)!) */
function powerSeries(x: number): number {
  const quarter = (-x * x) / 4;
  let term = 0.5;
  let sum = 0.5;
  for (let m = 1; m <= 12; m++) {
    term *= quarter / (m * (m + 1));
    sum += term;
  }
  return sum;
}

/** J_{m-1} = (2m/x) J_m - J_{m+1} from an order where J is negligible, scaled by J0 + 2 J2 + 2 J4 + ... = 1. */
function backwardRecurrence(x: number): number {
  const start = 2 * Math.ceil((18 + 1.7 * x) / 2); // J of this order is below 1e-16 for 2 <= x < 25
  const twoOverX = 2 / x;
  let odd = 0; // J of the order above the even one, up to a common factor
  let even = 1e-30;
  let evens = 0;
  for (let order = start; order > 0; order -= 2) {
    evens += even;
    odd = order * twoOverX * even - odd;
    even = (order - 1) * twoOverX * odd - even;
  }
  return odd / (even + 2 * evens);
}

/** a_k of Hankel's expansion for order 1: prod_{j=1}^{k} (4 - (2j-1)^2) / (8 j). */
const HANKEL = Array.from({ length: 24 }, () => 0);
for (let k = 0, product = 1; k < HANKEL.length; k++) {
  HANKEL[k] = product;
  product *= (4 - (2 * k + 1) ** 2) / (8 * (k + 1));
}

/** sqrt(2 / pi x) (P cos w - Q sin w), w = x - 3 pi/4, P and Q the even and odd terms a_k x^-k with alternating signs. */
function asymptotic(x: number): number {
  let p = 0;
  let q = 0;
  let power = 1;
  const inverse = 1 / x;
  for (let k = 0; k < HANKEL.length; k++) {
    const term = HANKEL[k]! * power;
    const sign = k & 2 ? -1 : 1;
    if (k & 1) q += sign * term;
    else p += sign * term;
    if (Math.abs(term) < 1e-17) break;
    power *= inverse;
  }
  const sine = Math.sin(x);
  const cosine = Math.cos(x);
  // cos w = (sin x - cos x) / sqrt 2, sin w = -(sin x + cos x) / sqrt 2
  return ((sine - cosine) * p + (sine + cosine) * q) / Math.sqrt(Math.PI * x);
}
