import { add, mul } from "./lanes";

/** Kernel values that reach a place (row-warp.ts). */
const TAPS: i32 = 6;
const TAP_BYTES: usize = 24;

@inline
function wrapped(index: i32, length: i32): usize {
  return <usize>((index + length) % length);
}

/**
 * Read rows of a periodic grid of `length` complex64 points: y[row, p] = sum_t taps[row, p, t] grid[row, start[row, p] + t].
 * @param taps six values a place, and room for two more behind the last
 */
export function gatherTaps(grid: usize, start: usize, taps: usize, y: usize, rows: usize, length: i32, count: usize): void {
  const bytes = <usize>length << 3;
  for (; rows; rows--, grid += bytes) {
    for (const end = start + (count << 2); start < end; start += 4, taps += TAP_BYTES, y += 8) {
      const first = load<i32>(start);
      if (first >= 0 && first + TAPS <= length) {
        const g = grid + (<usize>first << 3), low = v128.load(taps), high = v128.load(taps, 16);
        let sum = mul(v128.load(g), v128.shuffle<f32>(low, low, 0, 0, 1, 1));
        sum = add(sum, mul(v128.load(g, 16), v128.shuffle<f32>(low, low, 2, 2, 3, 3)));
        sum = add(sum, mul(v128.load(g, 32), v128.shuffle<f32>(high, high, 0, 0, 1, 1)));
        sum = add(sum, v128.shuffle<f32>(sum, sum, 2, 3, 0, 1));
        store<f64>(y, f64x2.extract_lane(sum, 0));
      } else {
        let re: f32 = 0, im: f32 = 0;
        for (let t: i32 = 0; t < TAPS; t++) {
          const g = grid + (wrapped(first + t, length) << 3), value = load<f32>(taps + (<usize>t << 2));
          re += value * load<f32>(g);
          im += value * load<f32>(g, 4);
        }
        store<f32>(y, re);
        store<f32>(y, im, 4);
      }
    }
  }
}

/** The transpose: grid[row, start + t] += taps[row, p, t] x[row, p]. */
export function scatterTaps(grid: usize, start: usize, taps: usize, x: usize, rows: usize, length: i32, count: usize): void {
  const bytes = <usize>length << 3;
  for (; rows; rows--, grid += bytes) {
    for (const end = start + (count << 2); start < end; start += 4, taps += TAP_BYTES, x += 8) {
      const first = load<i32>(start);
      if (first >= 0 && first + TAPS <= length) {
        const g = grid + (<usize>first << 3), value = v128.load_splat<u64>(x), low = v128.load(taps), high = v128.load(taps, 16);
        v128.store(g, add(v128.load(g), mul(value, v128.shuffle<f32>(low, low, 0, 0, 1, 1))));
        v128.store(g, add(v128.load(g, 16), mul(value, v128.shuffle<f32>(low, low, 2, 2, 3, 3))), 16);
        v128.store(g, add(v128.load(g, 32), mul(value, v128.shuffle<f32>(high, high, 0, 0, 1, 1))), 32);
      } else {
        const re = load<f32>(x), im = load<f32>(x, 4);
        for (let t: i32 = 0; t < TAPS; t++) {
          const g = grid + (wrapped(first + t, length) << 3), value = load<f32>(taps + (<usize>t << 2));
          store<f32>(g, load<f32>(g) + value * re);
          store<f32>(g, load<f32>(g, 4) + value * im, 4);
        }
      }
    }
  }
}

/** y += conj(weights) x over `count` complex64. */
export function addWeighted(x: usize, weights: usize, y: usize, count: usize): void {
  const end = x + (count << 3), pairs = x + ((count & ~1) << 3), signs = f32x4(1, -1, 1, -1);
  for (; x < pairs; x += 16, weights += 16, y += 16) {
    const value = v128.load(x), weight = v128.load(weights);
    // re: wr xr + wi xi; im: wr xi - wi xr
    const straight = mul(v128.shuffle<f32>(weight, weight, 0, 0, 2, 2), value);
    const crossed = mul(mul(v128.shuffle<f32>(weight, weight, 1, 1, 3, 3), signs), v128.shuffle<f32>(value, value, 1, 0, 3, 2));
    v128.store(y, add(v128.load(y), add(straight, crossed)));
  }
  if (x < end) {
    const re = load<f32>(x), im = load<f32>(x, 4), a = load<f32>(weights), b = load<f32>(weights, 4);
    store<f32>(y, load<f32>(y) + (a * re + b * im));
    store<f32>(y, load<f32>(y, 4) + (a * im - b * re), 4);
  }
}

/** y *= x, `count` complex64. */
export function multiplyComplex(y: usize, x: usize, count: usize): void {
  const end = x + (count << 3), pairs = x + ((count & ~1) << 3), signs = f32x4(-1, 1, -1, 1);
  for (; x < pairs; x += 16, y += 16) {
    const value = v128.load(y), factor = v128.load(x);
    const straight = mul(v128.shuffle<f32>(factor, factor, 0, 0, 2, 2), value);
    const crossed = mul(mul(v128.shuffle<f32>(factor, factor, 1, 1, 3, 3), signs), v128.shuffle<f32>(value, value, 1, 0, 3, 2));
    v128.store(y, add(straight, crossed));
  }
  if (x < end) {
    const re = load<f32>(y), im = load<f32>(y, 4), c = load<f32>(x), s = load<f32>(x, 4);
    store<f32>(y, re * c - im * s);
    store<f32>(y, re * s + im * c, 4);
  }
}
