/** Complex numbers in float64, interleaved: constants of a plan before they are rounded to float32. */

/** exp(-2 pi i k / n) to the last bit or so: the angle is reduced to an eighth of a turn first. Returns [re, im]. */
export function unitRoot(k: number, n: number): [re: number, im: number] {
  const turn = ((k % n) + n) % n;
  const quarter = Math.floor((4 * turn) / n);
  const rest = turn - (quarter * n) / 4; // in [0, n/4)
  const near = 8 * rest <= n;
  const angle = (2 * Math.PI * (near ? rest : n / 4 - rest)) / n;
  const cos = near ? Math.cos(angle) : Math.sin(angle);
  const sin = near ? Math.sin(angle) : Math.cos(angle);
  if (quarter === 0) return [cos, -sin];
  if (quarter === 1) return [-sin, -cos];
  if (quarter === 2) return [-cos, sin];
  return [sin, cos];
}

/** Interleaved exp(-2 pi i turns[j] / n). */
export function unitRoots(turns: ArrayLike<number>, n: number): Float64Array {
  const roots = new Float64Array(2 * turns.length);
  for (let j = 0; j < turns.length; j++) roots.set(unitRoot(turns[j]!, n), 2 * j);
  return roots;
}

/** Twiddles of a Stockham pass: rows p = 1 .. groups-1 of k = 1 .. radix-1, exp(-2 pi i p k / (groups radix)). */
export function twiddles(radix: number, groups: number): Float64Array {
  const turns: number[] = [];
  for (let p = 1; p < groups; p++) for (let k = 1; k < radix; k++) turns.push(p * k);
  return unitRoots(turns, radix * groups);
}

/** The cosines and sines of a direct pass, in the order that the module's passDirect reads them. */
export function directTable(radix: number): Float64Array {
  const half = (radix - 1) / 2;
  const table: number[] = [];
  for (let k = 1; k <= half; k += 2) {
    for (let j = 1; j <= half; j++) {
      for (const output of [k, k + 1]) {
        const [cos, minusSin] = unitRoot(j * output, radix);
        table.push(cos, -minusSin);
      }
    }
  }
  return Float64Array.from(table);
}

/** Rader's filter: the transform of exp(-2 pi i g^-j / prime), j = 0 .. prime-2, over prime - 1. */
export function raderFilter(prime: number, powers: Uint32Array): Float64Array {
  const count = prime - 1;
  const inverses = Uint32Array.from(powers, (_, j) => powers[(count - j) % count]!);
  return forwardTransform(unitRoots(inverses, prime).map((value) => value / count));
}

/** Bluestein's chirp, exp(-pi i j^2 / n) for j < n. */
export function chirp(length: number): Float64Array {
  return unitRoots(
    Float64Array.from({ length }, (_, j) => (j * j) % (2 * length)),
    2 * length,
  );
}

/** The transform of the chirp's conjugate, laid out both ways round a convolution's length, over that length. */
export function chirpFilter(chirped: Float64Array, convolution: number): Float64Array {
  const filter = new Float64Array(2 * convolution);
  for (let j = 0; 2 * j < chirped.length; j++) {
    const value = [chirped[2 * j]! / convolution, -chirped[2 * j + 1]! / convolution];
    filter.set(value, 2 * j);
    if (j > 0) filter.set(value, 2 * (convolution - j));
  }
  return forwardTransform(filter);
}

/** Unscaled forward transform in float64, by recursion on the smallest prime factor. */
function forwardTransform(x: Float64Array): Float64Array {
  const n = x.length / 2;
  const radix = smallestFactor(n);
  const rest = n / radix;
  const roots = unitRoots(
    Float64Array.from({ length: n }, (_, t) => t),
    n,
  );
  const parts = Array.from({ length: radix }, (_, r) => {
    const part = new Float64Array(2 * rest);
    for (let j = 0; j < rest; j++) part.set(x.subarray(2 * (j * radix + r), 2 * (j * radix + r) + 2), 2 * j);
    return rest === 1 ? part : forwardTransform(part);
  });
  const out = new Float64Array(2 * n);
  for (let k = 0; k < n; k++) {
    for (let r = 0; r < radix; r++) {
      const part = parts[r]!;
      const from = 2 * (k % rest);
      const turn = 2 * ((r * k) % n);
      out[2 * k]! += part[from]! * roots[turn]! - part[from + 1]! * roots[turn + 1]!;
      out[2 * k + 1]! += part[from]! * roots[turn + 1]! + part[from + 1]! * roots[turn]!;
    }
  }
  return out;
}

function smallestFactor(n: number): number {
  for (let factor = 2; factor * factor <= n; factor++) if (n % factor === 0) return factor;
  return n;
}
