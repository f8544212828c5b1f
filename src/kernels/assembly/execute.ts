// Runs a plan over its scratch: Stockham passes, or one of two ways to turn an awkward length into a convolution
// (Rader, Proc. IEEE 56:1107, 1968, for a prime radix; Bluestein, IEEE Trans. Audio Electroacoust. 18:451, 1970).
// Both convolve by two forward transforms of another length: swapping re and im before and after the second makes it
// the inverse one.

import { passDirect } from "./direct";
import { add, mul, POINT, put, putTurned, splat, sub, word } from "./lanes";
import {
  KIND_PASSES, METHOD_DIRECT, METHOD_RADER, PASS_GROUPS, PASS_METHOD, PASS_ORDER, PASS_RADIX, PASS_RUN, PASS_TABLE,
  PASS_TWIDDLES, PASS_WORDS, PASS_WORK, PLAN_A, PLAN_B, PLAN_CHIRP, PLAN_FILTER, PLAN_KIND, PLAN_LENGTH, PLAN_PASSES,
  PLAN_SUBPLAN, PLAN_WORDS,
} from "./plan-layout";
import { pass2, pass3, pass4, pass5, pass7, pass8 } from "./radix";

/** Transform the points in the plan's scratch buffer A. Returns the buffer (A or B) that holds the result. */
export function execute(plan: usize): usize {
  return executeFrom(plan, word(plan, PLAN_A), word(plan, PLAN_B));
}

/** The same from buffer `a`, with `b` as the other. */
export function executeFrom(plan: usize, a: usize, b: usize): usize {
  if (word(plan, PLAN_KIND) != KIND_PASSES) return chirp(plan, a);
  let row = plan + 4 * PLAN_WORDS;
  for (let left = word(plan, PLAN_PASSES); left; left--, row += 4 * PASS_WORDS) {
    pass(row, a, b);
    const swap = a;
    a = b;
    b = swap;
  }
  return a;
}

function pass(row: usize, x: usize, y: usize): void {
  const method = word(row, PASS_METHOD), r = word(row, PASS_RADIX), m = word(row, PASS_GROUPS), s = word(row, PASS_RUN);
  const w = word(row, PASS_TWIDDLES);
  if (method == 4) pass4(m, s, x, y, w);
  else if (method == 2) pass2(m, s, x, y, w);
  else if (method == 3) pass3(m, s, x, y, w);
  else if (method == 5) pass5(m, s, x, y, w);
  else if (method == 7) pass7(m, s, x, y, w);
  else if (method == 8) pass8(m, s, x, y, w);
  else if (method == METHOD_DIRECT) passDirect(r, m, s, x, y, w, word(row, PASS_TABLE), word(row, PASS_WORK));
  else if (method == METHOD_RADER) passRader(r, m, s, x, y, w, row);
}

/** Points at `data` times the table's complex numbers, real and imaginary parts swapped. */
@inline
function filterSwapped(data: usize, table: usize, count: usize): void {
  for (const end = data + count * POINT; data < end; data += POINT, table += 8) {
    const re = v128.load(data), im = v128.load(data, 16), fRe = splat(table), fIm = splat(table + 4);
    put(data, add(mul(re, fIm), mul(im, fRe)), sub(mul(re, fRe), mul(im, fIm)));
  }
}

/**
 * A pass of prime radix r: X[g^-q] = x[0] + sum_j x[g^j] w^(g^(j-q)), a cyclic convolution of length r - 1. x[0] is
 * added to every output through the first coefficient of the convolution's transform.
 */
function passRader(r: usize, m: usize, s: usize, x: usize, y: usize, w: usize, row: usize): void {
  const step = s * POINT, jump = m * step, count = r - 1;
  const plan = word(row, PASS_WORK), filter = word(row, PASS_TABLE), powers = word(row, PASS_ORDER);
  const a = word(plan, PLAN_A), b = word(plan, PLAN_B);
  for (let p: usize = 0; p < m; p++) {
    const turns = p ? w + (p - 1) * count * 8 - 8 : 0; // row p of the twiddles, so that k = 1 is its first
    for (let q: usize = 0; q < s; q++) {
      const from = x + p * step + q * POINT, to = y + r * p * step + q * POINT;
      for (let j: usize = 0; j < count; j++) {
        const point = from + word(powers, j) * jump;
        put(a + j * POINT, v128.load(point), v128.load(point, 16));
      }
      let result = executeFrom(plan, a, b);
      const xRe = v128.load(from), xIm = v128.load(from, 16);
      put(to, add(xRe, v128.load(result)), add(xIm, v128.load(result, 16)));
      filterSwapped(result, filter, count);
      put(result, add(v128.load(result), xIm), add(v128.load(result, 16), xRe));
      result = executeFrom(plan, result, result == a ? b : a);
      for (let j: usize = 0; j < count; j++) {
        const k = word(powers, j ? count - j : 0), point = result + j * POINT, re = v128.load(point, 16), im = v128.load(point);
        if (p) putTurned(to + k * step, re, im, splat(turns + k * 8), splat(turns + k * 8 + 4));
        else put(to + k * step, re, im);
      }
    }
  }
}

/** Any length n by a chirp c[j] = exp(-pi i j^2 / n): X[k] = c[k] sum_j (x[j] c[j]) conj(c[k-j]). In place in `a`. */
function chirp(plan: usize, a: usize): usize {
  const n = word(plan, PLAN_LENGTH), sub_ = word(plan, PLAN_SUBPLAN), filter = word(plan, PLAN_FILTER);
  const subA = word(sub_, PLAN_A), subB = word(sub_, PLAN_B), count = word(sub_, PLAN_LENGTH);
  let c = word(plan, PLAN_CHIRP);
  for (let j: usize = 0; j < n; j++, c += 8) {
    const point = a + j * POINT;
    putTurned(subA + j * POINT, v128.load(point), v128.load(point, 16), splat(c), splat(c + 4));
  }
  memory.fill(subA + n * POINT, 0, (count - n) * POINT);
  let result = executeFrom(sub_, subA, subB);
  filterSwapped(result, filter, count);
  result = executeFrom(sub_, result, result == subA ? subB : subA);
  c = word(plan, PLAN_CHIRP);
  for (let j: usize = 0; j < n; j++, c += 8) {
    const point = result + j * POINT;
    putTurned(a + j * POINT, v128.load(point, 16), v128.load(point), splat(c), splat(c + 4));
  }
  return a;
}
