import { besselJ1OverX } from "./bessel-j1.js";

/** An ellipse of constant intensity in the plane. Lengths share one unit; k is in cycles per that unit. */
export interface Ellipse {
  readonly x: number;
  readonly y: number;
  /** Semi-axes along x and y before rotation. */
  readonly a: number;
  readonly b: number;
  /** Turn from the x towards the y axis, degrees. */
  readonly degrees: number;
  readonly intensity: number;
}

/** The same ellipses with all lengths multiplied by `factor`. */
export function scaleEllipses(ellipses: readonly Ellipse[], factor: number): Ellipse[] {
  return ellipses.map((e) => ({ ...e, x: e.x * factor, y: e.y * factor, a: e.a * factor, b: e.b * factor }));
}

/** Summed intensity at a point (the rim counts as inside). */
export function intensityAt(ellipses: readonly Ellipse[], x: number, y: number): number {
  let sum = 0;
  for (const e of ellipses) {
    const { cosine, sine } = turn(e);
    const along = (x - e.x) * cosine + (y - e.y) * sine;
    const across = (y - e.y) * cosine - (x - e.x) * sine;
    if ((along / e.a) ** 2 + (across / e.b) ** 2 <= 1) sum += e.intensity;
  }
  return sum;
}

/**
 * Exact Fourier transform `integral rho(r) exp(-i 2 pi k.r) dr` of the sum of ellipses along a row of k-space.
 *
 * One ellipse: `A a b J1(2 pi K) / K exp(-i 2 pi k.r0)` with K^2 = (a k')^2 + (b k'')^2, k' and k'' along its axes;
 * `pi A a b` at k = 0. Van de Walle et al. 2000, IEEE Trans Med Imaging 19:1160; Koay et al. 2007, Magn Reson Med 58:430.
 * @param kx     cycles per unit, the row's samples
 * @param ky     cycles per unit, of the row or of each sample
 * @param result interleaved re, im, [kx]; added to
 * @param scale  factor of what is added
 */
export function addEllipseSpectrum(
  ellipses: readonly Ellipse[],
  kx: Float64Array,
  ky: number | Float64Array,
  result: Float64Array,
  scale = 1,
): void {
  for (const e of ellipses) {
    const { cosine, sine } = turn(e);
    const level = scale * e.intensity * e.a * e.b * 2 * Math.PI;
    for (let i = 0; i < kx.length; i++) {
      const k = kx[i]!;
      const l = typeof ky === "number" ? ky : ky[i]!;
      const along = e.a * (k * cosine + l * sine);
      const across = e.b * (l * cosine - k * sine);
      const value = level * besselJ1OverX(2 * Math.PI * Math.sqrt(along * along + across * across));
      const angle = -2 * Math.PI * (k * e.x + l * e.y);
      result[2 * i]! += value * Math.cos(angle);
      result[2 * i + 1]! += value * Math.sin(angle);
    }
  }
}

function turn(e: Ellipse): { cosine: number; sine: number } {
  const radians = (e.degrees * Math.PI) / 180;
  return { cosine: Math.cos(radians), sine: Math.sin(radians) };
}
