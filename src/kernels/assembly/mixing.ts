import { add, mul, splat, sub, word } from "./lanes";

/** Samples that are mixed together: a cache line of each channel. */
const BLOCK: usize = 8;
const BLOCK_BYTES: usize = 64;

/** Eight complex samples as re, im, re, im vectors of four. */
@inline
function part(from: usize, to: usize): void {
  const a = v128.load(from), b = v128.load(from, 16), c = v128.load(from, 32), d = v128.load(from, 48);
  v128.store(to, v128.shuffle<f32>(a, b, 0, 2, 4, 6));
  v128.store(to, v128.shuffle<f32>(a, b, 1, 3, 5, 7), 16);
  v128.store(to, v128.shuffle<f32>(c, d, 0, 2, 4, 6), 32);
  v128.store(to, v128.shuffle<f32>(c, d, 1, 3, 5, 7), 48);
}

/** Eight samples of one output channel: the parted channels at `x`, times a matrix row's entries from `w` to `end`. */
@inline
function mixRow(x: usize, w: usize, end: usize, y: usize): void {
  let aRe = f32x4.splat(0), aIm = aRe, bRe = aRe, bIm = aRe;
  for (; w < end; w += 8, x += BLOCK_BYTES) {
    const re = splat(w), im = splat(w + 4);
    const pRe = v128.load(x), pIm = v128.load(x, 16), qRe = v128.load(x, 32), qIm = v128.load(x, 48);
    aRe = sub(add(aRe, mul(re, pRe)), mul(im, pIm));
    aIm = add(add(aIm, mul(re, pIm)), mul(im, pRe));
    bRe = sub(add(bRe, mul(re, qRe)), mul(im, qIm));
    bIm = add(add(bIm, mul(re, qIm)), mul(im, qRe));
  }
  v128.store(y, v128.shuffle<f32>(aRe, aIm, 0, 4, 1, 5));
  v128.store(y, v128.shuffle<f32>(aRe, aIm, 2, 6, 3, 7), 16);
  v128.store(y, v128.shuffle<f32>(bRe, bIm, 0, 4, 1, 5), 32);
  v128.store(y, v128.shuffle<f32>(bRe, bIm, 2, 6, 3, 7), 48);
}

/**
 * y[line, o, s] = sum_c matrix[o, c] x[line, c, s], complex64. All input channels of eight samples are read before any
 * output of them is written, so x and y may be the same when the channel counts are.
 * @param spans two words a row: the first column that is not zero, and the one after the last
 * @param work  (inChannels + 1) 64-byte blocks
 */
export function mixChannels(
  x: usize, y: usize, matrix: usize, spans: usize, work: usize, lines: usize, inChannels: usize, outChannels: usize, samples: usize,
): void {
  const row = samples << 3, spare = work + inChannels * BLOCK_BYTES;
  for (; lines; lines--, x += inChannels * row, y += outChannels * row) {
    for (let s: usize = 0; s < samples; s += BLOCK) {
      const bytes = min(BLOCK, samples - s) << 3, whole = bytes == BLOCK_BYTES;
      let from = x + (s << 3), to = y + (s << 3);
      for (let p = work; p < spare; p += BLOCK_BYTES, from += row) {
        if (whole) part(from, p);
        else {
          memory.copy(spare, from, bytes); // what stands behind is mixed too, and dropped
          part(spare, p);
        }
      }
      for (let o: usize = 0; o < outChannels; o++, to += row) {
        const first = word(spans, 2 * o), last = word(spans, 2 * o + 1), w = matrix + o * inChannels * 8;
        mixRow(work + first * BLOCK_BYTES, w + first * 8, w + last * 8, whole ? to : spare);
        if (!whole) memory.copy(to, spare, bytes);
      }
    }
  }
}
