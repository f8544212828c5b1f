import type { FatWaterModel } from "./fat-water-model.js";
import { addCancelled, addDerivative, type Species, toImage } from "./fat-water-steps.js";
import type { TransformEngine } from "./transform.js";

/**
 * Phase between echoes of one train that are read in opposite directions: gradient delays and eddy currents turn an echo
 * read forward by `+(radians + radiansPerPixel x)` and one read backward by the negative of it, x in pixels from the
 * image's centre floor(n / 2). For equally spaced echoes a quarter turn of `radians` is the same as a field of 1 / (2 dTE).
 *
 * Source: Lu, Yu, Shimakawa, Hargreaves 2008, Magn Reson Med 60:198 (alternating echoes of one train).
 */
export interface EchoPhase {
  readonly radians: number;
  readonly radiansPerPixel: number;
}

/**
 * Take an echo phase off.
 * @param lines k-space along x, interleaved complex64, [rows, length]; overwritten
 * @param direction +1 for an echo read forward, -1 for one read backward
 */
export function turnEcho(
  engine: TransformEngine,
  lines: Float32Array,
  rows: number,
  phase: EchoPhase,
  direction: number,
): void {
  const length = lines.length / (2 * rows);
  toImage(engine, lines, lines, rows, length);
  for (let x = 0; x < length; x++) {
    const angle = -direction * (phase.radians + phase.radiansPerPixel * (x - Math.floor(length / 2)));
    const c = Math.cos(angle);
    const s = Math.sin(angle);
    for (let i = 2 * x; i < lines.length; i += 2 * length) {
      const re = lines[i]!;
      const im = lines[i + 1]!;
      lines[i] = re * c - im * s;
      lines[i + 1] = re * s + im * c;
    }
  }
  engine.transformAxis({ source: lines, target: lines, outer: rows, inner: 1, length, inverse: false });
}

/**
 * A first slope: `I1^2 conj(I0 I2)` of three echoes forward, backward, forward turns by `-4 radiansPerPixel` from pixel
 * to pixel wherever one species prevails (equally spaced echoes; the field drops out).
 * @param images combined echoes, interleaved complex64, [rows, length]
 * @param forward whether the first and third are the ones read forward
 */
export function echoPhaseSlope(
  images: readonly [Float32Array, Float32Array, Float32Array],
  length: number,
  forward: boolean,
): number {
  const [a, b, c] = images;
  const product = new Float64Array(a.length);
  for (let i = 0; i < a.length; i += 2) {
    const re = a[i]! * c[i]! - a[i + 1]! * c[i + 1]!;
    const im = a[i]! * c[i + 1]! + a[i + 1]! * c[i]!;
    const p = b[i]! * b[i]! - b[i + 1]! * b[i + 1]!;
    const q = 2 * b[i]! * b[i + 1]!;
    const size = Math.sqrt(Math.hypot(re, im) * Math.hypot(p, q)) || 1;
    product[i] = (p * re + q * im) / size;
    product[i + 1] = (q * re - p * im) / size;
  }
  let sumRe = 0;
  let sumIm = 0;
  for (let i = 0; i + 2 < product.length; i += 2) {
    if (i % (2 * length) === 2 * (length - 1)) continue; // not across the end of a row
    sumRe += product[i + 2]! * product[i]! + product[i + 3]! * product[i + 1]!;
    sumIm += product[i + 3]! * product[i]! - product[i + 2]! * product[i + 1]!;
  }
  return (Math.atan2(sumIm, sumRe) / 4) * (forward ? -1 : 1);
}

/**
 * The change of an odd/even phase that best explains the remainder: echoes read forward carry `+(a + b x)`, those read
 * backward `-(a + b x)` radians, x in pixels from the centre. The field of each pixel is let free beside it.
 * Source: Lu, Yu, Shimakawa, Hargreaves 2008, Magn Reson Med 60:198 (alternating echoes of one train).
 * @param mask 1 where there is signal, [rows, length]
 * @returns radians and radians per pixel to add to the phase taken off so far
 */
export function echoPhaseStep(
  engine: TransformEngine,
  rest: readonly Float32Array[],
  spectra: Species,
  model: FatWaterModel,
  rows: number,
  mask: Uint8Array,
): EchoPhase {
  const floats = spectra.water.length;
  const [r, g, h] = [
    engine.allocate(floats, false),
    engine.allocate(floats, false),
    engine.allocate(floats, false),
  ];
  const [hh, gh, gg, hr, gr] = Array.from({ length: 5 }, () => new Float64Array(mask.length));
  for (let triple = 0; triple + 2 < model.echoes; triple++) {
    for (const array of [r, g, h]) array.fill(0);
    for (let j = 0; j < 3; j++) {
      addCancelled(rest[triple + j]!, model, triple, j, rows, r);
      addDerivative(spectra, model, triple, j, rows, g, (seconds) => 2 * Math.PI * seconds);
      addDerivative(spectra, model, triple, j, rows, h, () =>
        Math.sign(model.timing.pixelBandwidthHz[triple + j]!),
      );
    }
    for (const array of [r, g, h]) toImage(engine, array, array, rows, model.length);
    for (const [sum, u, v] of [
      [hh!, h, h],
      [gh!, g, h],
      [gg!, g, g],
      [hr!, h, r],
      [gr!, g, r],
    ] as const)
      addProducts(u, v, sum);
  }
  for (const array of [r, g, h]) engine.release(array);
  const sums = [0, 0, 0, 0, 0];
  for (let p = 0; p < mask.length; p++) {
    if (!mask[p] || !(gg![p]! > 0)) continue;
    const x = (p % model.length) - Math.floor(model.length / 2);
    const weight = hh![p]! - gh![p]! ** 2 / gg![p]!; // what is left once the field is free
    const right = hr![p]! - (gh![p]! * gr![p]!) / gg![p]!;
    for (const [i, term] of [weight, weight * x, weight * x * x, right, right * x].entries())
      sums[i]! += term;
  }
  const [w0, w1, w2, r0, r1] = sums as [number, number, number, number, number];
  const determinant = w0 * w2 - w1 * w1;
  if (!(determinant > 0)) return { radians: 0, radiansPerPixel: 0 };
  return { radians: (w2 * r0 - w1 * r1) / determinant, radiansPerPixel: (w0 * r1 - w1 * r0) / determinant };
}

/** `sum += Re(conj(u) v)` for each pixel. */
function addProducts(u: Float32Array, v: Float32Array, sum: Float64Array): void {
  for (let p = 0, i = 0; p < sum.length; p++, i += 2) sum[p]! += u[i]! * v[i]! + u[i + 1]! * v[i + 1]!;
}
