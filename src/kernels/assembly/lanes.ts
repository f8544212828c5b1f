// Four lines at once: each SIMD lane carries one line of its own, so no line's bits depend on its neighbours.
// A point of four lines takes 32 bytes: a vector of real parts, a vector of imaginary parts.

@inline
export const POINT: usize = 32;

@inline
export function add(a: v128, b: v128): v128 {
  return f32x4.add(a, b);
}

@inline
export function sub(a: v128, b: v128): v128 {
  return f32x4.sub(a, b);
}

@inline
export function mul(a: v128, b: v128): v128 {
  return f32x4.mul(a, b);
}

/** One float at `p` in all four lanes. */
@inline
export function splat(p: usize): v128 {
  return v128.load_splat<f32>(p);
}

/** A complex number from a table at `p`, the same for all lanes, times (re, im); stored at `to`. */
@inline
export function putTurned(to: usize, re: v128, im: v128, wRe: v128, wIm: v128): void {
  v128.store(to, sub(mul(re, wRe), mul(im, wIm)));
  v128.store(to, add(mul(re, wIm), mul(im, wRe)), 16);
}

@inline
export function put(to: usize, re: v128, im: v128): void {
  v128.store(to, re);
  v128.store(to, im, 16);
}

/** Word `index` of the table at `p`. */
@inline
export function word(p: usize, index: usize): usize {
  return <usize>load<u32>(p + (index << 2));
}
