/**
 * Weighted smoothing of a real map by local quadratic regression: at each pixel, the quadratic surface that fits its
 * neighbourhood best (weights times a Gaussian of the distance) gives the value. A map that is quadratic comes out
 * unchanged, at edges and beside holes too, so peaks are not flattened as by averaging.
 *
 * Source: Cleveland and Devlin 1988, J Am Stat Assoc 83:596 (locally weighted regression);
 * Knutsson and Westin 1993, Proc IEEE CVPR 515 (normalised convolution with a polynomial basis).
 */
export interface SmoothedMap {
  /** [rows, columns]; 0 where nothing lies within reach. */
  readonly values: Float32Array;
  /** Standard error from the weights alone, in the unit of the values; Infinity where nothing lies within reach, or not asked for. */
  readonly standardErrors: Float32Array;
  /** Share of the Gaussian that fell on pixels with a weight: 1 inside, 1/2 on a straight edge, less beyond it. */
  readonly coverage: Float32Array;
}

/** Powers (x, y) of the basis of a quadratic surface. */
const BASIS = [
  [0, 0],
  [1, 0],
  [0, 1],
  [2, 0],
  [1, 1],
  [0, 2],
] as const;
const TERMS = BASIS.length;
/** Powers (x, y) of the moments that the products of two basis terms need; those up to second order come first. */
const MOMENTS = Array.from({ length: 5 }, (_, order) =>
  Array.from({ length: order + 1 }, (__, q) => [order - q, q] as const),
).flat();
const DATA_MOMENTS = 6;
/** The moment of each product of basis terms, [TERMS, TERMS]. */
const PRODUCT = Uint8Array.from(
  BASIS.flatMap(([p, q]) => BASIS.map(([r, s]) => MOMENTS.findIndex(([u, v]) => u === p + r && v === q + s))),
);
/** The moment of each basis term. */
const SINGLE = PRODUCT.subarray(0, TERMS);
/** Reach of the Gaussian in standard deviations. */
const REACH = 2.5;
/** Weight of slope and curvature against their own data: holds the fit where the neighbourhood lies on a line or a point. */
const RIDGE = 1e-4;

/**
 * @param values  [rows, columns]; not read where the weight is 0
 * @param weights inverse variances, 1 / unit^2, [rows, columns]; 0 leaves a pixel out
 * @param sigmaPixels standard deviation of the Gaussian
 * @param withErrors whether the standard errors are wanted; they take a third of the time
 * @param step    evaluate at every `step`-th row and column only: [ceil(rows / step), ceil(columns / step)]
 */
export function smoothMap(
  values: ArrayLike<number>,
  weights: Float32Array,
  rows: number,
  columns: number,
  sigmaPixels: number,
  withErrors: boolean,
  step = 1,
): SmoothedMap {
  const grid = { rows, columns, step, outColumns: Math.ceil(columns / step) };
  const weighted = weights.map((weight, i) => (weight > 0 ? weight * values[i]! : 0));
  const present = weights.map((weight) => (weight > 0 ? 1 : 0));
  const fit = gaussianMoments(sigmaPixels, 1);
  const spread = gaussianMoments(sigmaPixels, 2); // variances add up with the squares of the weights
  const matrix = new RowMoments(weights, grid, fit, MOMENTS.length);
  const data = new RowMoments(weighted, grid, fit, DATA_MOMENTS);
  const noise = withErrors ? new RowMoments(weights, grid, spread, MOMENTS.length) : undefined;
  const cover = new RowMoments(present, grid, fit, 1);
  const whole = fit[0]!.reduce((sum, tap) => sum + tap, 0) ** 2;
  const size = Math.ceil(rows / step) * grid.outColumns;
  const out = {
    values: new Float32Array(size),
    standardErrors: new Float32Array(size).fill(Number.POSITIVE_INFINITY),
    coverage: new Float32Array(size),
  };
  const solver = new LocalFit(sigmaPixels, grid.outColumns);
  for (let y = 0, i = 0; y < rows; y += step) {
    for (const moments of [matrix, data, noise, cover]) moments?.fill(y);
    for (let x = 0; x < grid.outColumns; x++, i++) {
      if (!solver.prepare(matrix.sums, x)) continue;
      out.values[i] = solver.value(data.sums, x);
      if (noise) out.standardErrors[i] = Math.sqrt(solver.variance(noise.sums, x));
      out.coverage[i] = cover.sums[x]! / whole;
    }
  }
  return out;
}

interface SmoothGrid {
  readonly rows: number;
  readonly columns: number;
  readonly step: number;
  readonly outColumns: number;
}

/** Kernels `gauss(u)^power u^p`, p = 0 .. 4, u = -radius .. radius. */
function gaussianMoments(sigma: number, power: number): Float64Array[] {
  const radius = Math.max(1, Math.ceil((REACH * sigma) / Math.sqrt(power)));
  return Array.from({ length: 5 }, (_, p) =>
    Float64Array.from({ length: 2 * radius + 1 }, (__, j) => {
      const u = j - radius;
      return Math.exp((-power * u * u) / (2 * sigma * sigma)) * u ** p;
    }),
  );
}

/** Moments of a map about the evaluated pixels of one row, [moment, outColumns]. */
class RowMoments {
  readonly sums: Float64Array;
  readonly #alongX: Float64Array[];
  /** 1 for rows that hold anything: the others are passed over. */
  readonly #filled: Uint8Array;

  constructor(
    map: Float32Array,
    private readonly grid: SmoothGrid,
    private readonly kernels: readonly Float64Array[],
    private readonly count: number,
  ) {
    this.sums = new Float64Array(count * grid.outColumns);
    const highest = MOMENTS[count - 1]![1];
    this.#filled = filledRows(map, grid);
    this.#alongX = kernels
      .slice(0, highest + 1)
      .map((kernel) => correlateRows(map, grid, this.#filled, kernel));
  }

  fill(y: number): void {
    const { kernels, sums, count } = this;
    const { rows, outColumns } = this.grid;
    const radius = (kernels[0]!.length - 1) / 2;
    sums.fill(0);
    for (let m = 0, base = 0; m < count; m++, base += outColumns) {
      const source = this.#alongX[MOMENTS[m]![0]]!;
      const kernel = kernels[MOMENTS[m]![1]]!;
      for (let row = Math.max(0, y - radius); row <= Math.min(rows - 1, y + radius); row++) {
        if (!this.#filled[row]) continue;
        const gain = kernel[row - y + radius]!;
        for (let at = row * outColumns, to = base; to < base + outColumns; at++, to++)
          sums[to]! += gain * source[at]!;
      }
    }
  }
}

function filledRows(map: Float32Array, { rows, columns }: SmoothGrid): Uint8Array {
  return Uint8Array.from({ length: rows }, (_, y) => {
    for (let i = y * columns; i < (y + 1) * columns; i++) if (map[i] !== 0) return 1;
    return 0;
  });
}

/** `out[y, i] = sum_u kernel[u] map[y, i step + u]`, zero beyond the edge. */
function correlateRows(
  map: Float32Array,
  grid: SmoothGrid,
  filled: Uint8Array,
  kernel: Float64Array,
): Float64Array {
  const { rows, columns, step, outColumns } = grid;
  const out = new Float64Array(rows * outColumns);
  const taps = kernel.length;
  const radius = (taps - 1) / 2;
  const line = new Float64Array(columns + 2 * radius);
  for (let y = 0; y < rows; y++) {
    if (!filled[y]) continue;
    for (let x = 0; x < columns; x++) line[x + radius] = map[y * columns + x]!;
    for (let i = 0, first = 0, to = y * outColumns; i < outColumns; i++, first += step, to++) {
      let sum = 0;
      for (let t = 0; t < taps; t++) sum += kernel[t]! * line[first + t]!;
      out[to] = sum;
    }
  }
  return out;
}

/** The 6 x 6 system of one pixel: the row of the inverse that gives the surface's value at the centre. */
class LocalFit {
  readonly #scale: Float64Array;
  readonly #factor = new Float64Array(TERMS * TERMS); // lower Cholesky factor
  readonly #row = new Float64Array(TERMS);

  constructor(
    sigma: number,
    private readonly columns: number,
  ) {
    this.#scale = Float64Array.from(BASIS, ([p, q]) => sigma ** -(p + q)); // keeps all terms near 1
  }

  /** @returns false where the neighbourhood holds no weight */
  prepare(moments: Float64Array, x: number): boolean {
    const total = moments[x]!;
    if (!(total > 0)) return false;
    const factor = this.#factor;
    const scale = this.#scale;
    for (let i = 0; i < TERMS; i++) {
      for (let j = 0; j <= i; j++) {
        let sum = (moments[PRODUCT[i * TERMS + j]! * this.columns + x]! * scale[i]! * scale[j]!) / total;
        if (i === j && i > 0) sum += RIDGE;
        for (let k = 0; k < j; k++) sum -= factor[i * TERMS + k]! * factor[j * TERMS + k]!;
        factor[i * TERMS + j] = i === j ? Math.sqrt(Math.max(sum, 1e-12)) : sum / factor[j * TERMS + j]!;
      }
    }
    this.#solveFirst(total);
    return true;
  }

  /** Row 0 of the inverse, back in the scale of the moments. */
  #solveFirst(total: number): void {
    const factor = this.#factor;
    const row = this.#row;
    for (let i = 0; i < TERMS; i++) {
      let sum = i === 0 ? 1 : 0;
      for (let k = 0; k < i; k++) sum -= factor[i * TERMS + k]! * row[k]!;
      row[i] = sum / factor[i * TERMS + i]!;
    }
    for (let i = TERMS - 1; i >= 0; i--) {
      let sum = row[i]!;
      for (let k = i + 1; k < TERMS; k++) sum -= factor[k * TERMS + i]! * row[k]!;
      row[i] = sum / factor[i * TERMS + i]!;
    }
    for (let i = 0; i < TERMS; i++) row[i]! *= this.#scale[i]! / total;
  }

  value(data: Float64Array, x: number): number {
    let sum = 0;
    for (let i = 0; i < TERMS; i++) sum += this.#row[i]! * data[SINGLE[i]! * this.columns + x]!;
    return sum;
  }

  variance(noise: Float64Array, x: number): number {
    const row = this.#row;
    let sum = 0;
    for (let i = 0; i < TERMS; i++) {
      sum += row[i]! * row[i]! * noise[PRODUCT[i * TERMS + i]! * this.columns + x]!;
      for (let j = 0; j < i; j++)
        sum += 2 * row[i]! * row[j]! * noise[PRODUCT[i * TERMS + j]! * this.columns + x]!;
    }
    return Math.max(0, sum);
  }
}
