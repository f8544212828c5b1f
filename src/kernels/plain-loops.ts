import type { Loops } from "./transform.js";

const f = Math.fround;
const TAPS = 6;

/** The loops in plain TypeScript: float32 operations in the order of the SIMD ones, so that the bits are the same. */
export const PLAIN_LOOPS: Loops = {
  gatherTaps(grid, { start, taps }, rows, target) {
    const length = grid.length / (2 * rows);
    const places = start.length / rows;
    for (let row = 0, i = 0; row < rows; row++)
      for (let p = 0; p < places; p++, i++) {
        const first = start[i]!;
        const k = i * TAPS;
        const base = 2 * row * length;
        let [re, im] = [0, 0];
        if (first >= 0 && first + TAPS <= length) {
          // even and odd taps apart, as the lanes add up
          const g = base + 2 * first;
          const [a, b, c] = [taps[k]!, taps[k + 2]!, taps[k + 4]!];
          const [d, e, h] = [taps[k + 1]!, taps[k + 3]!, taps[k + 5]!];
          const evenRe = f(f(f(a * grid[g]!) + f(b * grid[g + 4]!)) + f(c * grid[g + 8]!));
          const evenIm = f(f(f(a * grid[g + 1]!) + f(b * grid[g + 5]!)) + f(c * grid[g + 9]!));
          const oddRe = f(f(f(d * grid[g + 2]!) + f(e * grid[g + 6]!)) + f(h * grid[g + 10]!));
          const oddIm = f(f(f(d * grid[g + 3]!) + f(e * grid[g + 7]!)) + f(h * grid[g + 11]!));
          re = f(evenRe + oddRe);
          im = f(evenIm + oddIm);
        } else
          for (let t = 0; t < TAPS; t++) {
            const g = base + 2 * ((first + t + length) % length); // the grid is periodic
            re = f(re + f(taps[k + t]! * grid[g]!));
            im = f(im + f(taps[k + t]! * grid[g + 1]!));
          }
        target[2 * i] = re;
        target[2 * i + 1] = im;
      }
  },

  scatterTaps(grid, { start, taps }, rows, values) {
    const length = grid.length / (2 * rows);
    const places = start.length / rows;
    for (let row = 0, i = 0; row < rows; row++)
      for (let p = 0; p < places; p++, i++) {
        const first = start[i]!;
        const [re, im] = [values[2 * i]!, values[2 * i + 1]!];
        const base = 2 * row * length;
        const isInside = first >= 0 && first + TAPS <= length;
        for (let t = 0; t < TAPS; t++) {
          const g = base + 2 * (isInside ? first + t : (first + t + length) % length);
          const tap = taps[i * TAPS + t]!;
          grid[g]! += f(tap * re);
          grid[g + 1]! += f(tap * im);
        }
      }
  },

  multiplyComplex(values, factors) {
    for (let i = 0; i < values.length; i += 2) {
      const [re, im, c, s] = [values[i]!, values[i + 1]!, factors[i]!, factors[i + 1]!];
      values[i] = f(re * c) - f(im * s);
      values[i + 1] = f(im * c) + f(re * s);
    }
  },

  scaleRows(rows, gain) {
    for (let at = 0; at < rows.length; )
      for (let k = 0; k < gain.length; k++, at += 2) {
        rows[at]! *= gain[k]!;
        rows[at + 1]! *= gain[k]!;
      }
  },

  addWeighted(source, from, weights, target, to) {
    for (let i = 0; i < weights.length; i += 2) {
      const [re, im, a, b] = [source[from + i]!, source[from + i + 1]!, weights[i]!, weights[i + 1]!];
      target[to + i]! += f(f(a * re) + f(b * im));
      target[to + i + 1]! += f(f(a * im) - f(b * re));
    }
  },
};
