/**
 * Cholesky factor of a Hermitian positive definite matrix: A = L L^H, L lower triangular with a real positive diagonal.
 * @param a [n, n] interleaved re, im, row by row; only the lower triangle is read
 * @returns L, same layout, zeros above the diagonal; undefined where A is not positive definite to working precision
 * Source: Golub and Van Loan, Matrix Computations, algorithm 4.2.1 in its complex form.
 */
export function choleskyFactor(a: Float64Array, n: number): Float64Array | undefined {
  const l = new Float64Array(2 * n * n);
  for (let j = 0; j < n; j++) {
    for (let i = j; i < n; i++) {
      let re = a[2 * (i * n + j)]!;
      let im = a[2 * (i * n + j) + 1]!;
      for (let k = 0; k < j; k++) {
        const p = 2 * (i * n + k);
        const q = 2 * (j * n + k);
        re -= l[p]! * l[q]! + l[p + 1]! * l[q + 1]!;
        im -= l[p + 1]! * l[q]! - l[p]! * l[q + 1]!;
      }
      if (i === j) {
        // A pivot this small beside its diagonal element is rounding, not signal: the matrix is singular.
        if (!(re > 1e-12 * Math.abs(a[2 * (j * n + j)]!))) return undefined;
        l[2 * (j * n + j)] = Math.sqrt(re);
      } else {
        const pivot = l[2 * (j * n + j)]!;
        l[2 * (i * n + j)] = re / pivot;
        l[2 * (i * n + j) + 1] = im / pivot;
      }
    }
  }
  return l;
}

/**
 * Inverse of a complex lower triangular matrix, by forward substitution.
 * @param l [n, n] interleaved, row by row, non-zero diagonal
 */
export function invertLower(l: Float64Array, n: number): Float64Array {
  const inverse = new Float64Array(2 * n * n);
  for (let j = 0; j < n; j++) {
    for (let i = j; i < n; i++) {
      let re = i === j ? 1 : 0;
      let im = 0;
      for (let k = j; k < i; k++) {
        const p = 2 * (i * n + k);
        const q = 2 * (k * n + j);
        re -= l[p]! * inverse[q]! - l[p + 1]! * inverse[q + 1]!;
        im -= l[p]! * inverse[q + 1]! + l[p + 1]! * inverse[q]!;
      }
      const d = 2 * (i * n + i);
      const norm = l[d]! ** 2 + l[d + 1]! ** 2;
      inverse[2 * (i * n + j)] = (re * l[d]! + im * l[d + 1]!) / norm;
      inverse[2 * (i * n + j) + 1] = (im * l[d]! - re * l[d + 1]!) / norm;
    }
  }
  return inverse;
}
