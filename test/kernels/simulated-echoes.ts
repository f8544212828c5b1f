/**
 * Echo images of point sources by direct sums, without any kernel of the project: rows are taken as already resolved, the
 * readout of each is
 * `s(k) = sum_p (W_p + F_p sum_l a_l exp(-i 2 pi f_l tau_k)) exp(-i 2 pi (k x_p / N + f(x_p) tau_k) - R2* TE)` with
 * `tau_k = TE + k / (N bandwidth)`, and each image its inverse transform (centred, unitary).
 */
export interface SimulatedObject {
  readonly rows: number;
  readonly length: number;
  /** Pixels x from floor(length / 2), row index y. */
  readonly water: (x: number, y: number) => number;
  readonly fat?: (x: number, y: number) => number;
  readonly fieldHz: (x: number, y: number) => number;
  readonly decayPerSecond?: (x: number, y: number) => number;
  /** Complex sensitivity, 1 if left out. */
  readonly coil?: (x: number, y: number) => readonly [re: number, im: number];
  /** Point sources per pixel; odd, so that one lies on the pixel's centre. */
  readonly density: number;
}

export interface SimulatedEcho {
  readonly seconds: number;
  /** Hz per pixel; negative for a reversed readout. */
  readonly pixelBandwidthHz: number;
  readonly lines?: readonly { readonly offsetHz: number; readonly share: number }[];
}

/** @returns interleaved complex64, [rows, length] */
export function simulateEcho(object: SimulatedObject, echo: SimulatedEcho): Float32Array {
  const { rows, length, density } = object;
  const half = Math.floor(length / 2);
  const out = new Float32Array(2 * rows * length);
  for (let y = 0; y < rows; y++) {
    const line = new Float64Array(2 * length);
    for (let p = 0; p < length * density; p++) {
      const x = (p - (density - 1) / 2) / density - half;
      const [w, f] = [object.water(x, y) / density, (object.fat?.(x, y) ?? 0) / density];
      if (w !== 0 || f !== 0) addPoint(object, echo, x, y, w, f, line);
    }
    out.set(inverse(line), 2 * y * length);
  }
  return out;
}

function addPoint(
  object: SimulatedObject,
  { seconds, pixelBandwidthHz, lines = [] }: SimulatedEcho,
  x: number,
  y: number,
  water: number,
  fat: number,
  line: Float64Array,
): void {
  const { length } = object;
  const field = object.fieldHz(x, y);
  const size = Math.exp(-seconds * (object.decayPerSecond?.(x, y) ?? 0));
  const [cre, cim] = object.coil?.(x, y) ?? [1, 0];
  for (let j = 0; j < length; j++) {
    const k = j - Math.floor(length / 2);
    const tau = seconds + k / (length * pixelBandwidthHz);
    let [re, im] = [water, 0];
    for (const { offsetHz, share } of fat === 0 ? [] : lines) {
      re += fat * share * Math.cos(-2 * Math.PI * offsetHz * tau);
      im += fat * share * Math.sin(-2 * Math.PI * offsetHz * tau);
    }
    const angle = -2 * Math.PI * ((k * x) / length + field * tau);
    const [c, s] = [size * Math.cos(angle), size * Math.sin(angle)];
    const [a, b] = [re * c - im * s, re * s + im * c];
    line[2 * j]! += a * cre - b * cim;
    line[2 * j + 1]! += a * cim + b * cre;
  }
}

/** Unitary: a point of weight 1 on a pixel has the value 1 there. */
function inverse(line: Float64Array): Float64Array {
  const length = line.length / 2;
  const half = Math.floor(length / 2);
  const out = new Float64Array(2 * length);
  for (let i = 0; i < length; i++) {
    for (let j = 0; j < length; j++) {
      const angle = (2 * Math.PI * (j - half) * (i - half)) / length;
      const [c, s] = [Math.cos(angle) / length, Math.sin(angle) / length];
      out[2 * i]! += line[2 * j]! * c - line[2 * j + 1]! * s;
      out[2 * i + 1]! += line[2 * j]! * s + line[2 * j + 1]! * c;
    }
  }
  return out;
}

/** Root of the sum of squares of `a - b` over that of `b`, over the mask. */
export function maskedError(a: ArrayLike<number>, b: ArrayLike<number>, mask: ArrayLike<number>): number {
  let [difference, norm] = [0, 0];
  for (let i = 0; i < b.length; i++) {
    if (!mask[i]) continue;
    difference += (a[i]! - b[i]!) ** 2;
    norm += b[i]! ** 2;
  }
  return Math.sqrt(difference / norm);
}

export function magnitudes(image: Float32Array): Float32Array {
  return Float32Array.from({ length: image.length / 2 }, (_, p) =>
    Math.hypot(image[2 * p]!, image[2 * p + 1]!),
  );
}

/** Add normal noise of the given deviation to each part. */
export function addNoise(image: Float32Array, deviation: number, normal: () => number): Float32Array {
  return image.map((value) => value + deviation * normal());
}
