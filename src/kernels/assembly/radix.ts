// Stockham passes (decimation in frequency, self-sorting) of radix 2, 3, 4, 5, 7, 8 over points of four lines:
//   y[q + s (r p + k)] = w^(p k) * sum_j x[q + s (p + m j)] exp(-2 pi i j k / r),  w = exp(-2 pi i / (r m))
// for p < m, q < s, k < r. Twiddles `w`: rows p = 1 .. m-1 of k = 1 .. r-1, complex (p = 0 turns nothing).
// Source: van Loan, Computational Frameworks for the Fast Fourier Transform, SIAM 1992, section 1.7.

import { add, mul, POINT, put, putTurned, splat, sub } from "./lanes";

/** Store output k of a butterfly, turned by the complex number at `w` unless this is the row p = 0. */
@inline
function out(turn: bool, to: usize, re: v128, im: v128, w: usize): void {
  if (turn) putTurned(to, re, im, splat(w), splat(w + 4));
  else put(to, re, im);
}

/** Outputs k and r - k: (re, im) -+ i (qRe, qIm). */
@inline
function pair(turn: bool, low: usize, high: usize, re: v128, im: v128, qRe: v128, qIm: v128, wLow: usize, wHigh: usize): void {
  out(turn, low, add(re, qIm), sub(im, qRe), wLow);
  out(turn, high, sub(re, qIm), add(im, qRe), wHigh);
}

@inline
function row2(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT;
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    const aRe = v128.load(x), aIm = v128.load(x, 16);
    const bRe = v128.load(x + jump), bIm = v128.load(x + jump, 16);
    put(y, add(aRe, bRe), add(aIm, bIm));
    out(turn, y + step, sub(aRe, bRe), sub(aIm, bIm), w);
  }
}

@inline
function row3(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT;
  const half = f32x4.splat(0.5), sine = f32x4.splat(0.8660254037844386);
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    const aRe = v128.load(x), aIm = v128.load(x, 16);
    const bRe = v128.load(x + jump), bIm = v128.load(x + jump, 16);
    const cRe = v128.load(x + 2 * jump), cIm = v128.load(x + 2 * jump, 16);
    const sRe = add(bRe, cRe), sIm = add(bIm, cIm);
    put(y, add(aRe, sRe), add(aIm, sIm));
    pair(
      turn, y + step, y + 2 * step,
      sub(aRe, mul(half, sRe)), sub(aIm, mul(half, sIm)),
      mul(sine, sub(bRe, cRe)), mul(sine, sub(bIm, cIm)), w, w + 8,
    );
  }
}

@inline
function row4(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT;
  let w1Re = f32x4.splat(0), w1Im = w1Re, w2Re = w1Re, w2Im = w1Re, w3Re = w1Re, w3Im = w1Re;
  if (turn) {
    w1Re = splat(w); w1Im = splat(w + 4);
    w2Re = splat(w + 8); w2Im = splat(w + 12);
    w3Re = splat(w + 16); w3Im = splat(w + 20);
  }
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    const aRe = v128.load(x), aIm = v128.load(x, 16);
    const cRe = v128.load(x + 2 * jump), cIm = v128.load(x + 2 * jump, 16);
    const sRe = add(aRe, cRe), sIm = add(aIm, cIm), dRe = sub(aRe, cRe), dIm = sub(aIm, cIm);
    const bRe = v128.load(x + jump), bIm = v128.load(x + jump, 16);
    const eRe = v128.load(x + 3 * jump), eIm = v128.load(x + 3 * jump, 16);
    const tRe = add(bRe, eRe), tIm = add(bIm, eIm), uRe = sub(bRe, eRe), uIm = sub(bIm, eIm);
    put(y, add(sRe, tRe), add(sIm, tIm));
    if (turn) {
      putTurned(y + step, add(dRe, uIm), sub(dIm, uRe), w1Re, w1Im);
      putTurned(y + 2 * step, sub(sRe, tRe), sub(sIm, tIm), w2Re, w2Im);
      putTurned(y + 3 * step, sub(dRe, uIm), add(dIm, uRe), w3Re, w3Im);
    } else {
      put(y + step, add(dRe, uIm), sub(dIm, uRe));
      put(y + 2 * step, sub(sRe, tRe), sub(sIm, tIm));
      put(y + 3 * step, sub(dRe, uIm), add(dIm, uRe));
    }
  }
}

@inline
function row5(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT;
  const c1 = f32x4.splat(0.30901699437494745), c2 = f32x4.splat(-0.8090169943749475);
  const s1 = f32x4.splat(0.9510565162951535), s2 = f32x4.splat(0.5877852522924731);
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    const bRe = v128.load(x + jump), bIm = v128.load(x + jump, 16);
    const eRe = v128.load(x + 4 * jump), eIm = v128.load(x + 4 * jump, 16);
    const t1Re = add(bRe, eRe), t1Im = add(bIm, eIm), d1Re = sub(bRe, eRe), d1Im = sub(bIm, eIm);
    const cRe = v128.load(x + 2 * jump), cIm = v128.load(x + 2 * jump, 16);
    const dRe = v128.load(x + 3 * jump), dIm = v128.load(x + 3 * jump, 16);
    const t2Re = add(cRe, dRe), t2Im = add(cIm, dIm), d2Re = sub(cRe, dRe), d2Im = sub(cIm, dIm);
    const aRe = v128.load(x), aIm = v128.load(x, 16);
    put(y, add(aRe, add(t1Re, t2Re)), add(aIm, add(t1Im, t2Im)));
    pair(
      turn, y + step, y + 4 * step,
      add(aRe, add(mul(c1, t1Re), mul(c2, t2Re))), add(aIm, add(mul(c1, t1Im), mul(c2, t2Im))),
      add(mul(s1, d1Re), mul(s2, d2Re)), add(mul(s1, d1Im), mul(s2, d2Im)), w, w + 24,
    );
    pair(
      turn, y + 2 * step, y + 3 * step,
      add(aRe, add(mul(c2, t1Re), mul(c1, t2Re))), add(aIm, add(mul(c2, t1Im), mul(c1, t2Im))),
      sub(mul(s2, d1Re), mul(s1, d2Re)), sub(mul(s2, d1Im), mul(s1, d2Im)), w + 8, w + 16,
    );
  }
}

/** a + c1 t1 + c2 t2 + c3 t3. */
@inline
function cosines(a: v128, c1: v128, t1: v128, c2: v128, t2: v128, c3: v128, t3: v128): v128 {
  return add(add(a, mul(c1, t1)), add(mul(c2, t2), mul(c3, t3)));
}

@inline
function row7(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT;
  const c1 = f32x4.splat(0.6234898018587336), c2 = f32x4.splat(-0.2225209339563144), c3 = f32x4.splat(-0.9009688679024191);
  const s1 = f32x4.splat(0.7818314824680298), s2 = f32x4.splat(0.9749279121818236), s3 = f32x4.splat(0.4338837391175581);
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    let lRe = v128.load(x + jump), lIm = v128.load(x + jump, 16);
    let hRe = v128.load(x + 6 * jump), hIm = v128.load(x + 6 * jump, 16);
    const t1Re = add(lRe, hRe), t1Im = add(lIm, hIm), d1Re = sub(lRe, hRe), d1Im = sub(lIm, hIm);
    lRe = v128.load(x + 2 * jump); lIm = v128.load(x + 2 * jump, 16);
    hRe = v128.load(x + 5 * jump); hIm = v128.load(x + 5 * jump, 16);
    const t2Re = add(lRe, hRe), t2Im = add(lIm, hIm), d2Re = sub(lRe, hRe), d2Im = sub(lIm, hIm);
    lRe = v128.load(x + 3 * jump); lIm = v128.load(x + 3 * jump, 16);
    hRe = v128.load(x + 4 * jump); hIm = v128.load(x + 4 * jump, 16);
    const t3Re = add(lRe, hRe), t3Im = add(lIm, hIm), d3Re = sub(lRe, hRe), d3Im = sub(lIm, hIm);
    const aRe = v128.load(x), aIm = v128.load(x, 16);
    put(y, add(add(aRe, t1Re), add(t2Re, t3Re)), add(add(aIm, t1Im), add(t2Im, t3Im)));
    pair(
      turn, y + step, y + 6 * step,
      cosines(aRe, c1, t1Re, c2, t2Re, c3, t3Re), cosines(aIm, c1, t1Im, c2, t2Im, c3, t3Im),
      add(mul(s1, d1Re), add(mul(s2, d2Re), mul(s3, d3Re))), add(mul(s1, d1Im), add(mul(s2, d2Im), mul(s3, d3Im))),
      w, w + 40,
    );
    pair(
      turn, y + 2 * step, y + 5 * step,
      cosines(aRe, c2, t1Re, c3, t2Re, c1, t3Re), cosines(aIm, c2, t1Im, c3, t2Im, c1, t3Im),
      sub(mul(s2, d1Re), add(mul(s3, d2Re), mul(s1, d3Re))), sub(mul(s2, d1Im), add(mul(s3, d2Im), mul(s1, d3Im))),
      w + 8, w + 32,
    );
    pair(
      turn, y + 3 * step, y + 4 * step,
      cosines(aRe, c3, t1Re, c1, t2Re, c2, t3Re), cosines(aIm, c3, t1Im, c1, t2Im, c2, t3Im),
      add(sub(mul(s3, d1Re), mul(s1, d2Re)), mul(s2, d3Re)), add(sub(mul(s3, d1Im), mul(s1, d2Im)), mul(s2, d3Im)),
      w + 16, w + 24,
    );
  }
}

// Radix 8: radix 4 of the even and of the odd inputs, the odd ones turned by eighths, then sums and differences.
@inline
function row8(turn: bool, s: usize, x: usize, y: usize, jump: usize, w: usize): void {
  const step = s * POINT, eighth = f32x4.splat(0.7071067811865476);
  for (const end = x + step; x < end; x += POINT, y += POINT) {
    let aRe = v128.load(x), aIm = v128.load(x, 16), cRe = v128.load(x + 4 * jump), cIm = v128.load(x + 4 * jump, 16);
    let sRe = add(aRe, cRe), sIm = add(aIm, cIm), dRe = sub(aRe, cRe), dIm = sub(aIm, cIm);
    let bRe = v128.load(x + 2 * jump), bIm = v128.load(x + 2 * jump, 16), eRe = v128.load(x + 6 * jump), eIm = v128.load(x + 6 * jump, 16);
    let tRe = add(bRe, eRe), tIm = add(bIm, eIm), uRe = sub(bRe, eRe), uIm = sub(bIm, eIm);
    const e0Re = add(sRe, tRe), e0Im = add(sIm, tIm), e2Re = sub(sRe, tRe), e2Im = sub(sIm, tIm);
    const e1Re = add(dRe, uIm), e1Im = sub(dIm, uRe), e3Re = sub(dRe, uIm), e3Im = add(dIm, uRe);
    aRe = v128.load(x + jump); aIm = v128.load(x + jump, 16); cRe = v128.load(x + 5 * jump); cIm = v128.load(x + 5 * jump, 16);
    sRe = add(aRe, cRe); sIm = add(aIm, cIm); dRe = sub(aRe, cRe); dIm = sub(aIm, cIm);
    bRe = v128.load(x + 3 * jump); bIm = v128.load(x + 3 * jump, 16); eRe = v128.load(x + 7 * jump); eIm = v128.load(x + 7 * jump, 16);
    tRe = add(bRe, eRe); tIm = add(bIm, eIm); uRe = sub(bRe, eRe); uIm = sub(bIm, eIm);
    const o0Re = add(sRe, tRe), o0Im = add(sIm, tIm), o2Re = sub(sRe, tRe), o2Im = sub(sIm, tIm);
    put(y, add(e0Re, o0Re), add(e0Im, o0Im));
    out(turn, y + 4 * step, sub(e0Re, o0Re), sub(e0Im, o0Im), w + 24);
    pair(turn, y + 2 * step, y + 6 * step, e2Re, e2Im, o2Re, o2Im, w + 8, w + 40);
    const o1Re = add(dRe, uIm), o1Im = sub(dIm, uRe), o3Re = sub(dRe, uIm), o3Im = add(dIm, uRe);
    const pRe = mul(eighth, add(o1Re, o1Im)), pIm = mul(eighth, sub(o1Im, o1Re));
    out(turn, y + step, add(e1Re, pRe), add(e1Im, pIm), w);
    out(turn, y + 5 * step, sub(e1Re, pRe), sub(e1Im, pIm), w + 32);
    const qRe = mul(eighth, sub(o3Im, o3Re)), qIm = mul(eighth, add(o3Re, o3Im)); // minus the turned one's imaginary part
    out(turn, y + 3 * step, add(e3Re, qRe), sub(e3Im, qIm), w + 16);
    out(turn, y + 7 * step, sub(e3Re, qRe), add(e3Im, qIm), w + 48);
  }
}

export function pass2(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row2(false, s, x, y, jump, w);
  for (x += s * POINT, y += 2 * s * POINT; x < last; x += s * POINT, y += 2 * s * POINT, w += 8) row2(true, s, x, y, jump, w);
}

export function pass3(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row3(false, s, x, y, jump, w);
  for (x += s * POINT, y += 3 * s * POINT; x < last; x += s * POINT, y += 3 * s * POINT, w += 16) row3(true, s, x, y, jump, w);
}

export function pass4(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row4(false, s, x, y, jump, w);
  for (x += s * POINT, y += 4 * s * POINT; x < last; x += s * POINT, y += 4 * s * POINT, w += 24) row4(true, s, x, y, jump, w);
}

export function pass5(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row5(false, s, x, y, jump, w);
  for (x += s * POINT, y += 5 * s * POINT; x < last; x += s * POINT, y += 5 * s * POINT, w += 32) row5(true, s, x, y, jump, w);
}

export function pass7(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row7(false, s, x, y, jump, w);
  for (x += s * POINT, y += 7 * s * POINT; x < last; x += s * POINT, y += 7 * s * POINT, w += 48) row7(true, s, x, y, jump, w);
}

export function pass8(m: usize, s: usize, x: usize, y: usize, w: usize): void {
  const jump = m * s * POINT, last = x + jump;
  row8(false, s, x, y, jump, w);
  for (x += s * POINT, y += 8 * s * POINT; x < last; x += s * POINT, y += 8 * s * POINT, w += 56) row8(true, s, x, y, jump, w);
}
