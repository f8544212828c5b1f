/**
 * The default covariance of receiver noise, `E[n n^H]`, [coil, coil] interleaved: gains from 1 to 1.5 across the coils
 * and a correlation of 0.3 between neighbours that falls as 0.3^distance and turns by 0.7 rad a step. Positive
 * definite: the correlation is that of a first-order autoregressive process.
 * @param sigma standard deviation of the real and imaginary part of coil 0
 */
export function defaultCovariance(coils: number, sigma: number): Float64Array {
  const covariance = new Float64Array(2 * coils * coils);
  const gain = (coil: number) => 1 + (0.5 * coil) / Math.max(1, coils - 1);
  for (let i = 0; i < coils; i++) {
    for (let j = 0; j < coils; j++) {
      const size = 2 * sigma * sigma * gain(i) * gain(j) * 0.3 ** Math.abs(i - j);
      covariance[2 * (i * coils + j)] = size * Math.cos(0.7 * (i - j));
      covariance[2 * (i * coils + j) + 1] = size * Math.sin(0.7 * (i - j));
    }
  }
  return covariance;
}

/** True where a matrix equals its conjugate transpose, to 1e-9 of its trace. [row, column] interleaved. */
export function isHermitian(matrix: Float64Array, size: number): boolean {
  const at = (row: number, column: number) => 2 * (row * size + column);
  let trace = 0;
  for (let i = 0; i < size; i++) trace += Math.abs(matrix[at(i, i)]!);
  for (let i = 0; i < size; i++) {
    for (let j = 0; j <= i; j++) {
      const skewRe = matrix[at(i, j)]! - matrix[at(j, i)]!;
      const skewIm = matrix[at(i, j) + 1]! + matrix[at(j, i) + 1]!;
      if (!(Math.hypot(skewRe, skewIm) <= 1e-9 * trace)) return false;
    }
  }
  return true;
}
