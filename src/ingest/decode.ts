import type { ScanFacts } from "../physics/scan.js";
import { runsBackward, type SampleWindow, sampleWindow } from "./place.js";
import type { ReadoutHead } from "./record.js";

/**
 * Copy one readout's samples onto the encoded grid in the order of rising k, as the recipe's `scan` asks: turned round
 * where it ran backward, conjugated, its sign changed, moved to another centre. Samples that were not acquired are zero.
 * @param samples [coil, sample] interleaved complex, in time order
 * @param target [coil, encoded sample], from float `at` on
 * @returns whether the target now holds the samples just as they are stored
 * @throws InputError if the samples reach beyond the encoded matrix
 */
export function decodeReadout(
  samples: Float32Array,
  head: ReadoutHead,
  scan: ScanFacts,
  target: Float32Array,
  at: number,
  file: string,
): boolean {
  const encoded = scan.encoded.matrix.x;
  const backward = runsBackward(head, scan.overrides.readoutPolarity);
  const center = scan.measuredCenter[backward ? "reverse" : "forward"] ?? head.centerSample;
  const window = sampleWindow(head, encoded, backward, center, file);
  const length = 2 * head.channels * encoded;
  const isWhole = window.count === encoded && head.samples === encoded;
  if (isWhole && !backward) target.set(samples, at);
  else copyLines(samples, head, window, target.subarray(at, at + length), encoded);
  const { conjugate, alternateSign, recentreMm } = scan.overrides;
  const line = target.subarray(at, at + length);
  if (conjugate) for (let i = 1; i < length; i += 2) line[i] = -line[i]!;
  if (alternateSign && head.counters.kspace_encode_step_1 % 2 === 1)
    for (let i = 0; i < length; i++) line[i] = -line[i]!;
  const moves = recentreMm.some((mm) => mm !== 0);
  if (moves) recentre(line, head, scan);
  return isWhole && !backward && !conjugate && !alternateSign && !moves;
}

function copyLines(
  samples: Float32Array,
  head: ReadoutHead,
  { first, count, encodedStart, reversed }: SampleWindow,
  target: Float32Array,
  encoded: number,
): void {
  if (count < encoded) target.fill(0);
  for (let coil = 0; coil < head.channels; coil++) {
    const from = 2 * (coil * head.samples + first);
    const to = 2 * (coil * encoded + encodedStart);
    if (!reversed) target.set(samples.subarray(from, from + 2 * count), to);
    else
      for (let j = 0, p = from + 2 * (count - 1), q = to; j < count; j++, p -= 2, q += 2) {
        target[q] = samples[p]!;
        target[q + 1] = samples[p + 1]!;
      }
  }
}

/** Multiply by exp(+i 2 pi k . r0): the point r0 (mm along read, phase, slice) becomes the centre. */
function recentre(line: Float32Array, head: ReadoutHead, scan: ScanFacts): void {
  const { matrix, fovMm } = scan.encoded;
  const [x, y, z] = scan.overrides.recentreMm;
  const ky = (head.counters.kspace_encode_step_1 - scan.center.y) / fovMm.y;
  const kz = (head.counters.kspace_encode_step_2 - scan.center.z) / fovMm.z;
  const turns = ky * y + (scan.dimensions === 3 ? kz * z : 0);
  for (let j = 0; j < matrix.x; j++) {
    const angle = 2 * Math.PI * (((j - Math.floor(matrix.x / 2)) / fovMm.x) * x + turns);
    const c = Math.cos(angle);
    const s = Math.sin(angle);
    for (let p = 2 * j; p < line.length; p += 2 * matrix.x) {
      const re = line[p]!;
      const im = line[p + 1]!;
      line[p] = re * c - im * s;
      line[p + 1] = re * s + im * c;
    }
  }
}
