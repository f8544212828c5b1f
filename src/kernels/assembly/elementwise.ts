/** y = gain x over `count` floats. */
@inline
function scaleRun(x: usize, y: usize, count: usize, gain: f32): void {
  const gains = f32x4.splat(gain), end = x + (count << 2), vectors = x + ((count & ~3) << 2);
  for (; x < vectors; x += 16, y += 16) v128.store(y, f32x4.mul(v128.load(x), gains));
  for (; x < end; x += 4, y += 4) store<f32>(y, load<f32>(x) * gain);
}

/** Complex y[i] = window[i] x[i], a gain for each of `count` samples. */
@inline
function multiplyRun(x: usize, y: usize, window: usize, count: usize): void {
  const end = window + (count << 2), vectors = window + ((count & ~3) << 2);
  for (; window < vectors; window += 16, x += 32, y += 32) {
    const gains = v128.load(window);
    const a = f32x4.mul(v128.load(x), v128.shuffle<f32>(gains, gains, 0, 0, 1, 1));
    const b = f32x4.mul(v128.load(x, 16), v128.shuffle<f32>(gains, gains, 2, 2, 3, 3));
    v128.store(y, a);
    v128.store(y, b, 16);
  }
  for (; window < end; window += 4, x += 8, y += 8) {
    const gain = load<f32>(window), re = load<f32>(x) * gain, im = load<f32>(x, 4) * gain;
    store<f32>(y, re);
    store<f32>(y, im, 4);
  }
}

/** Complex y[o, k, i] = window[k] x[o, k, i] for k < count, i < inner; blocks of the outer axis are `block` bytes apart. */
export function multiplyAxis(x: usize, y: usize, window: usize, count: usize, inner: usize, outer: usize, block: usize): void {
  for (; outer; outer--, x += block, y += block) {
    if (inner == 1) multiplyRun(x, y, window, count);
    else for (let k: usize = 0; k < count; k++) scaleRun(x + k * inner * 8, y + k * inner * 8, 2 * inner, load<f32>(window + (k << 2)));
  }
}

/** x *= factor. */
export function scale(x: usize, count: usize, factor: f32): void {
  scaleRun(x, x, count, factor);
}

/** y += x. */
export function addTo(y: usize, x: usize, count: usize): void {
  const end = x + (count << 2), vectors = x + ((count & ~3) << 2);
  for (; x < vectors; x += 16, y += 16) v128.store(y, f32x4.add(v128.load(y), v128.load(x)));
  for (; x < end; x += 4, y += 4) store<f32>(y, load<f32>(y) + load<f32>(x));
}

/** Reverse the bytes of each 32-bit word, in place. */
export function swapWords(x: usize, count: usize): void {
  const end = x + (count << 2), vectors = x + ((count & ~3) << 2);
  for (; x < vectors; x += 16) {
    const words = v128.load(x);
    v128.store(x, v128.shuffle<u8>(words, words, 3, 2, 1, 0, 7, 6, 5, 4, 11, 10, 9, 8, 15, 14, 13, 12));
  }
  for (; x < end; x += 4) store<u32>(x, bswap<u32>(load<u32>(x)));
}
