/**
 * Maps of displacement along one axis, and the way between a map in the coordinates of the (displaced) image and one in
 * the coordinates of the object. A spin at x with field f is seen at `x' = x + f(x) / pixelBandwidth`; the bandwidth per
 * pixel is positive on a forward readout, negative on a reversed one.
 *
 * Source: Jezzard and Balaban 1995, Magn Reson Med 34:65, doi:10.1002/mrm.1910340111.
 */

/**
 * How the displacement stretches each pixel: `1 + d(displacement)/dx`, central differences, one-sided at the ends.
 * @param displacementPixels [rows, length]
 */
export function stretchFactors(
  displacementPixels: ArrayLike<number>,
  rows: number,
  length: number,
): Float32Array {
  const out = new Float32Array(rows * length).fill(1);
  if (length < 2) return out;
  for (let row = 0; row < rows; row++) {
    const base = row * length;
    for (let x = 0; x < length; x++) {
      const left = Math.max(0, x - 1);
      const right = Math.min(length - 1, x + 1);
      out[base + x] =
        1 + (displacementPixels[base + right]! - displacementPixels[base + left]!) / (right - left);
    }
  }
  return out;
}

/**
 * Pixels whose signal lies on top of that of other pixels of the row: those between which the order of places is turned
 * round (stretch factor not positive) and those that share a place with them. The image cannot tell them apart.
 * @param displacementPixels [rows, length]
 * @returns 1 for a folded pixel, [rows, length]
 */
export function foldedPixels(
  displacementPixels: ArrayLike<number>,
  rows: number,
  length: number,
): Uint8Array {
  const out = new Uint8Array(rows * length);
  for (let row = 0; row < rows; row++) {
    const base = row * length;
    let highest = Number.NEGATIVE_INFINITY;
    for (let x = 0; x < length; x++) {
      const place = x + displacementPixels[base + x]!;
      if (place <= highest) out[base + x] = 1;
      else highest = place;
    }
    let lowest = Number.POSITIVE_INFINITY;
    for (let x = length - 1; x >= 0; x--) {
      const place = x + displacementPixels[base + x]!;
      if (place >= lowest) out[base + x] = 1;
      else lowest = place;
    }
  }
  return out;
}

/** Pixels that are folded in any echo: what displaces forward in one goes backward in another. */
export function foldedInAny(
  fieldHz: Float32Array,
  pixelBandwidthHz: readonly number[],
  rows: number,
  length: number,
): Uint8Array {
  const out = new Uint8Array(fieldHz.length);
  for (const bandwidthHz of new Set(pixelBandwidthHz)) {
    const displacement = fieldHz.map((hz) => hz / bandwidthHz);
    const folded = foldedPixels(displacement, rows, length);
    for (let i = 0; i < out.length; i++) out[i]! |= folded[i]!;
  }
  return out;
}

/**
 * Carry maps measured in the image's coordinates to the object's: `object(x) = image(x + field(x) / pixelBandwidth)`,
 * where `field` itself is found by fixed-point iteration from the inverse of `x' - image(x') / pixelBandwidth`.
 * @param imageFieldHz Hz, [rows, length], smooth and defined everywhere
 * @param pixelBandwidthHz negative on a reversed readout
 * @returns places: where in the image each pixel of the object is seen, pixel indices, [rows, length]; the field there;
 *   and folded, 1 where several places of the image claim to come from the pixel
 */
export function objectField(
  imageFieldHz: Float32Array,
  rows: number,
  length: number,
  pixelBandwidthHz: number,
): { fieldHz: Float32Array; places: Float32Array; folded: Uint8Array } {
  const fieldHz = new Float32Array(rows * length);
  const places = new Float32Array(rows * length);
  for (let row = 0; row < rows; row++) {
    const line = imageFieldHz.subarray(row * length, (row + 1) * length);
    const first = inverseOfRow(line, pixelBandwidthHz);
    for (let x = 0; x < length; x++) {
      let place = first[x]!;
      for (let step = 0; step < 4; step++) place = x + cubicAt(line, place) / pixelBandwidthHz;
      places[row * length + x] = place;
      fieldHz[row * length + x] = cubicAt(line, place);
    }
  }
  return { fieldHz, places, folded: foldedOrigins(imageFieldHz, rows, length, pixelBandwidthHz) };
}

/** Pixels of the object among the origins of image pixels that share theirs with others. */
function foldedOrigins(
  imageFieldHz: Float32Array,
  rows: number,
  length: number,
  pixelBandwidthHz: number,
): Uint8Array {
  const back = imageFieldHz.map((hz) => -hz / pixelBandwidthHz);
  const shared = foldedPixels(back, rows, length);
  const out = new Uint8Array(rows * length);
  for (let row = 0; row < rows; row++) {
    const base = row * length;
    for (let start = 0; start < length; start++) {
      if (!shared[base + start]) continue;
      let [low, high, end] = [Number.POSITIVE_INFINITY, Number.NEGATIVE_INFINITY, start];
      for (; end < length && shared[base + end]; end++) {
        low = Math.min(low, end + back[base + end]!);
        high = Math.max(high, end + back[base + end]!);
      }
      for (let x = Math.max(0, Math.ceil(low)); x <= Math.min(length - 1, Math.floor(high)); x++)
        out[base + x] = 1;
      start = end;
    }
  }
  return out;
}

/** For each x the place x' with `x' - line(x') / bandwidth = x`, linear between pixels; where several, the last one. */
function inverseOfRow(line: Float32Array, pixelBandwidthHz: number): Float64Array {
  const length = line.length;
  const origin = (place: number) => place - line[place]! / pixelBandwidthHz;
  const out = new Float64Array(length);
  let cell = 0;
  for (let x = 0; x < length; x++) {
    while (cell < length - 2 && origin(cell + 1) < x) cell++;
    const [a, b] = [origin(cell), origin(Math.min(length - 1, cell + 1))];
    const share = b > a ? (x - a) / (b - a) : 0;
    // beyond the ends the field of the last pixel holds
    out[x] = share < 0 ? cell + x - a : share > 1 ? cell + 1 + x - b : cell + share;
  }
  return out;
}

/**
 * Value of a row between its samples by the cubic convolution that reproduces parabolas; the end samples continued.
 * Source: Keys 1981, IEEE Trans Acoust Speech Signal Process 29:1153, doi:10.1109/TASSP.1981.1163711 (a = -1/2).
 */
export function cubicAt(line: ArrayLike<number>, place: number): number {
  const last = line.length - 1;
  const at = Math.min(last, Math.max(0, place));
  const cell = Math.min(Math.max(0, last - 1), Math.floor(at));
  const u = at - cell;
  const p1 = line[cell]!;
  const p2 = line[Math.min(last, cell + 1)]!;
  const p0 = cell > 0 ? line[cell - 1]! : 2 * p1 - p2;
  const p3 = cell + 2 <= last ? line[cell + 2]! : 2 * p2 - p1;
  return p1 + 0.5 * u * (p2 - p0 + u * (2 * p0 - 5 * p1 + 4 * p2 - p3 + u * (3 * (p1 - p2) + p3 - p0)));
}

/**
 * A smooth map on another grid over the same field of view, cubic along both axes; pixel floor(n / 2) stays the centre.
 * @param map [rows, columns]
 * @returns [toRows, toColumns]
 */
export function resampleMap(
  map: ArrayLike<number>,
  rows: number,
  columns: number,
  toRows: number,
  toColumns: number,
): Float32Array {
  const wide = new Float32Array(rows * toColumns);
  const line = new Float64Array(columns);
  for (let y = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++) line[x] = map[y * columns + x]!;
    for (let x = 0; x < toColumns; x++)
      wide[y * toColumns + x] = cubicAt(line, sourceIndex(x, toColumns, columns));
  }
  const out = new Float32Array(toRows * toColumns);
  const column = new Float64Array(rows);
  for (let x = 0; x < toColumns; x++) {
    for (let y = 0; y < rows; y++) column[y] = wide[y * toColumns + x]!;
    for (let y = 0; y < toRows; y++) out[y * toColumns + x] = cubicAt(column, sourceIndex(y, toRows, rows));
  }
  return out;
}

/** Index in a grid of `to` pixels of pixel `index` of a grid of `from` pixels over the same field of view. */
function sourceIndex(index: number, from: number, to: number): number {
  return ((index - Math.floor(from / 2)) * to) / from + Math.floor(to / 2);
}
