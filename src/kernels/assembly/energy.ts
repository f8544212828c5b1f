/** |x|^2 of the two complex64 samples at `x`, in float64. */
@inline
function squares(x: usize): v128 {
  const samples = v128.load(x);
  const a = f64x2.promote_low_f32x4(samples), b = f64x2.promote_low_f32x4(v128.shuffle<f32>(samples, samples, 2, 3, 2, 3));
  const aa = f64x2.mul(a, a), bb = f64x2.mul(b, b);
  return f64x2.add(v128.shuffle<f64>(aa, bb, 0, 2), v128.shuffle<f64>(aa, bb, 1, 3));
}

/** |x|^2 of one sample. */
@inline
function square(x: usize): f64 {
  const re = <f64>load<f32>(x), im = <f64>load<f32>(x, 4);
  return re * re + im * im;
}

/** profile[s] += sum over rows of |x[row, s]|^2 for s < count; rows are `row` bytes apart. */
export function addEnergy(x: usize, row: usize, rows: usize, profile: usize, count: usize): void {
  for (; rows; rows--, x += row) {
    let from = x, to = profile;
    const end = profile + (count << 3), vectors = profile + ((count & ~1) << 3);
    for (; to < vectors; to += 16, from += 16) v128.store(to, f64x2.add(v128.load(to), squares(from)));
    if (to < end) store<f64>(to, load<f64>(to) + square(from));
  }
}

/** y[o, i] = sqrt(sum_c |x[o, c, i]|^2), summed in float64, c rising. Four pixels at a time. */
export function rootSumOfSquares(x: usize, y: usize, outer: usize, channels: usize, inner: usize): void {
  const row = inner << 3;
  for (; outer; outer--, x += channels * row) {
    let from = x;
    const end = x + row, vectors = x + ((inner & ~3) << 3);
    for (; from < vectors; from += 32, y += 16) {
      let a = f64x2.splat(0), b = a;
      for (let p = from, left = channels; left; left--, p += row) {
        a = f64x2.add(a, squares(p));
        b = f64x2.add(b, squares(p + 16));
      }
      const low = f32x4.demote_f64x2_zero(f64x2.sqrt(a)), high = f32x4.demote_f64x2_zero(f64x2.sqrt(b));
      v128.store(y, v128.shuffle<f32>(low, high, 0, 1, 4, 5));
    }
    for (; from < end; from += 8, y += 4) {
      let sum = 0.0;
      for (let p = from, left = channels; left; left--, p += row) sum += square(p);
      store<f32>(y, <f32>sqrt<f64>(sum));
    }
  }
}
