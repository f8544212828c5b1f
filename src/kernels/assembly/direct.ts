// A Stockham pass of any odd radix r by its sums, halved by the symmetry of cosine and sine (see radix.ts for the pass).

import { add, mul, POINT, put, putTurned, splat, sub } from "./lanes";

@inline
const PAIR: usize = 2 * POINT;

/** Outputs k and r - k from their cosine part (re, im) and sine part (qRe, qIm). */
@inline
function outputs(low: usize, high: usize, re: v128, im: v128, qRe: v128, qIm: v128, wLow: usize, wHigh: usize): void {
  if (wLow) {
    putTurned(low, add(re, qRe), sub(im, qIm), splat(wLow), splat(wLow + 4));
    putTurned(high, sub(re, qRe), add(im, qIm), splat(wHigh), splat(wHigh + 4));
  } else {
    put(low, add(re, qRe), sub(im, qIm));
    put(high, sub(re, qRe), add(im, qIm));
  }
}

/** Sums x[j] + x[r-j] and differences x[j] - x[r-j], j = 1 .. (r-1)/2, into `work`; their total to `y`. */
@inline
function fold(work: usize, end: usize, x: usize, jump: usize, last: usize, y: usize): void {
  let totalRe = v128.load(x), totalIm = v128.load(x, 16);
  let low = x + jump, high = x + last;
  for (let t = work; t < end; t += PAIR, low += jump, high -= jump) {
    const aRe = v128.load(low), aIm = v128.load(low, 16), bRe = v128.load(high), bIm = v128.load(high, 16);
    const sRe = add(aRe, bRe), sIm = add(aIm, bIm);
    put(t, sRe, sIm);
    put(t + POINT, sub(aRe, bRe), sub(aIm, bIm));
    totalRe = add(totalRe, sRe);
    totalIm = add(totalIm, sIm);
  }
  put(y, totalRe, totalIm);
}

/**
 * @param table for k = 1, 3, 5 ..: for each j the cosine and sine of 2 pi j k / r, then of 2 pi j (k+1) / r: two
 *   outputs and their mirrors share each load of the folded inputs
 * @param work  r points
 */
export function passDirect(r: usize, m: usize, s: usize, x: usize, y: usize, w: usize, table: usize, work: usize): void {
  const step = s * POINT, jump = m * step, half = (r - 1) >> 1, end = work + half * PAIR;
  for (let p: usize = 0; p < m; p++) {
    const turns = p ? w + (p - 1) * (r - 1) * 8 : 0;
    for (let q: usize = 0; q < s; q++) {
      const from = x + p * step + q * POINT, to = y + r * p * step + q * POINT;
      fold(work, end, from, jump, (r - 1) * jump, to);
      const xRe = v128.load(from), xIm = v128.load(from, 16);
      let c = table, low = to + step, high = to + (r - 1) * step;
      let wLow = turns, wHigh = turns ? turns + (r - 2) * 8 : 0;
      const turn: usize = turns ? 8 : 0;
      for (let k: usize = 0; k < half; k += 2) {
        let aRe = xRe, aIm = xIm, bRe = xRe, bIm = xIm;
        let aqRe = f32x4.splat(0), aqIm = aqRe, bqRe = aqRe, bqIm = aqRe;
        for (let t = work; t < end; t += PAIR, c += 16) {
          let u = v128.load(t), v = v128.load(t, 16), g = splat(c);
          aRe = add(aRe, mul(g, u)); aIm = add(aIm, mul(g, v));
          g = splat(c + 8);
          bRe = add(bRe, mul(g, u)); bIm = add(bIm, mul(g, v));
          u = v128.load(t, 48); v = v128.load(t, 32); g = splat(c + 4);
          aqRe = add(aqRe, mul(g, u)); aqIm = add(aqIm, mul(g, v));
          g = splat(c + 12);
          bqRe = add(bqRe, mul(g, u)); bqIm = add(bqIm, mul(g, v));
        }
        outputs(low, high, aRe, aIm, aqRe, aqIm, wLow, wHigh);
        low += step; high -= step; wLow += turn; wHigh -= turn;
        if (k + 1 < half) outputs(low, high, bRe, bIm, bqRe, bqIm, wLow, wHigh);
        low += step; high -= step; wLow += turn; wHigh -= turn;
      }
    }
  }
}
