// Four lines of interleaved complex64 to and from points. `lane1..3`: bytes from the first line to the others;
// `step`: bytes from a sample to the next on a line; `re`, `im`: where in a point the parts go (0 and 16, or swapped).

import { mul, POINT } from "./lanes";

/** Adjacent lines: sample j of all four is 32 bytes. */
@inline
function loadColumns(count: usize, x: usize, step: usize, to: usize, re: usize, im: usize): void {
  for (const end = to + count * POINT; to < end; to += POINT, x += step) {
    const a = v128.load(x), b = v128.load(x, 16);
    v128.store(to + re, v128.shuffle<f32>(a, b, 0, 2, 4, 6));
    v128.store(to + im, v128.shuffle<f32>(a, b, 1, 3, 5, 7));
  }
}

@inline
function storeColumns(count: usize, from: usize, y: usize, step: usize, re: usize, im: usize, scale: v128): void {
  for (const end = from + count * POINT; from < end; from += POINT, y += step) {
    const r = mul(v128.load(from + re), scale), i = mul(v128.load(from + im), scale);
    v128.store(y, v128.shuffle<f32>(r, i, 0, 4, 1, 5));
    v128.store(y, v128.shuffle<f32>(r, i, 2, 6, 3, 7), 16);
  }
}

/** Sixteen adjacent lines, four to each buffer, buffers `gap` bytes apart: whole cache lines of every row. */
export function loadWide(count: usize, x: usize, step: usize, to: usize, gap: usize, re: usize, im: usize): void {
  for (const end = to + count * POINT; to < end; to += POINT, x += step) {
    loadColumns(1, x, step, to, re, im);
    loadColumns(1, x + 32, step, to + gap, re, im);
    loadColumns(1, x + 64, step, to + 2 * gap, re, im);
    loadColumns(1, x + 96, step, to + 3 * gap, re, im);
  }
}

export function storeWide(
  count: usize, a: usize, b: usize, c: usize, d: usize, y: usize, step: usize, re: usize, im: usize, scale: v128,
): void {
  for (const end = a + count * POINT; a < end; a += POINT, b += POINT, c += POINT, d += POINT, y += step) {
    storeColumns(1, a, y, step, re, im, scale);
    storeColumns(1, b, y + 32, step, re, im, scale);
    storeColumns(1, c, y + 64, step, re, im, scale);
    storeColumns(1, d, y + 96, step, re, im, scale);
  }
}

/** Lines anywhere, samples `step` apart. */
@inline
function loadApart(
  count: usize, x: usize, step: usize, lane1: usize, lane2: usize, lane3: usize, to: usize, re: usize, im: usize,
): void {
  for (const end = to + count * POINT; to < end; to += POINT, x += step) {
    const a = v128.load_lane<u64>(x + lane1, v128.load_zero<u64>(x), 1);
    const b = v128.load_lane<u64>(x + lane3, v128.load_zero<u64>(x + lane2), 1);
    v128.store(to + re, v128.shuffle<f32>(a, b, 0, 2, 4, 6));
    v128.store(to + im, v128.shuffle<f32>(a, b, 1, 3, 5, 7));
  }
}

@inline
function storeApart(
  count: usize, from: usize, y: usize, step: usize, lane1: usize, lane2: usize, lane3: usize, re: usize, im: usize, scale: v128,
): void {
  for (const end = from + count * POINT; from < end; from += POINT, y += step) {
    const r = mul(v128.load(from + re), scale), i = mul(v128.load(from + im), scale);
    const a = v128.shuffle<f32>(r, i, 0, 4, 1, 5), b = v128.shuffle<f32>(r, i, 2, 6, 3, 7);
    v128.store_lane<u64>(y, a, 0);
    v128.store_lane<u64>(y + lane1, a, 1);
    v128.store_lane<u64>(y + lane2, b, 0);
    v128.store_lane<u64>(y + lane3, b, 1);
  }
}

/** Lines anywhere, samples adjacent: two samples of each line at a time, transposed. */
@inline
function loadRows(count: usize, x: usize, lane1: usize, lane2: usize, lane3: usize, to: usize, re: usize, im: usize): void {
  for (const end = to + (count & ~1) * POINT; to < end; to += 2 * POINT, x += 16) {
    const a = v128.load(x), b = v128.load(x + lane1), c = v128.load(x + lane2), d = v128.load(x + lane3);
    const ab0 = v128.shuffle<f32>(a, b, 0, 1, 4, 5), cd0 = v128.shuffle<f32>(c, d, 0, 1, 4, 5);
    const ab1 = v128.shuffle<f32>(a, b, 2, 3, 6, 7), cd1 = v128.shuffle<f32>(c, d, 2, 3, 6, 7);
    v128.store(to + re, v128.shuffle<f32>(ab0, cd0, 0, 2, 4, 6));
    v128.store(to + im, v128.shuffle<f32>(ab0, cd0, 1, 3, 5, 7));
    v128.store(to + re, v128.shuffle<f32>(ab1, cd1, 0, 2, 4, 6), 32);
    v128.store(to + im, v128.shuffle<f32>(ab1, cd1, 1, 3, 5, 7), 32);
  }
  if (count & 1) loadApart(1, x, 8, lane1, lane2, lane3, to, re, im);
}

@inline
function storeRows(
  count: usize, from: usize, y: usize, lane1: usize, lane2: usize, lane3: usize, re: usize, im: usize, scale: v128,
): void {
  for (const end = from + (count & ~1) * POINT; from < end; from += 2 * POINT, y += 16) {
    const r0 = mul(v128.load(from + re), scale), i0 = mul(v128.load(from + im), scale);
    const r1 = mul(v128.load(from + re, 32), scale), i1 = mul(v128.load(from + im, 32), scale);
    const a = v128.shuffle<f32>(r0, i0, 0, 4, 1, 5), b = v128.shuffle<f32>(r0, i0, 2, 6, 3, 7);
    const c = v128.shuffle<f32>(r1, i1, 0, 4, 1, 5), d = v128.shuffle<f32>(r1, i1, 2, 6, 3, 7);
    v128.store(y, v128.shuffle<f32>(a, c, 0, 1, 4, 5));
    v128.store(y + lane1, v128.shuffle<f32>(a, c, 2, 3, 6, 7));
    v128.store(y + lane2, v128.shuffle<f32>(b, d, 0, 1, 4, 5));
    v128.store(y + lane3, v128.shuffle<f32>(b, d, 2, 3, 6, 7));
  }
  if (count & 1) storeApart(1, from, y, 8, lane1, lane2, lane3, re, im, scale);
}

/** Four columns when the lanes are 8 bytes apart, rows when the samples are, else the general way. */
export function loadRun(
  count: usize, x: usize, step: usize, lane1: usize, lane2: usize, lane3: usize, to: usize, re: usize, im: usize,
): void {
  if (lane1 == 8 && lane2 == 16 && lane3 == 24) loadColumns(count, x, step, to, re, im);
  else if (step == 8) loadRows(count, x, lane1, lane2, lane3, to, re, im);
  else loadApart(count, x, step, lane1, lane2, lane3, to, re, im);
}

export function storeRun(
  count: usize, from: usize, y: usize, step: usize, lane1: usize, lane2: usize, lane3: usize, re: usize, im: usize, scale: v128,
): void {
  if (lane1 == 8 && lane2 == 16 && lane3 == 24) storeColumns(count, from, y, step, re, im, scale);
  else if (step == 8) storeRows(count, from, y, lane1, lane2, lane3, re, im, scale);
  else storeApart(count, from, y, step, lane1, lane2, lane3, re, im, scale);
}
