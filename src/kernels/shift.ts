/**
 * Shift an image along the readout by a linear phase on its k-space lines: `S(k) exp(-i 2 pi k shift / length)`.
 *
 * Exact for any fraction of a pixel, and periodic over the field of view of `length` samples: what leaves on one side
 * comes back on the other, so shift before the oversampling is trimmed. A spin `offsetHz` off resonance is seen at
 * `+offsetHz / pixelBandwidthHz` on a forward readout and at the opposite on a reversed one; the shift that puts it
 * back is the negative of that. It equals demodulation by `exp(+i 2 pi offsetHz t)` with t = 0 at k = 0.
 * @param lines  interleaved complex64, [..., length], k ascending; not modified
 * @param length complex samples per line
 * @param shiftPixels pixels (field of view / length) towards larger x: one number, or one for each line
 * @param centre index of k = 0 in a line
 * @throws RangeError when the array is not whole lines, or the shifts are not one per line
 * Source: Fourier shift theorem; Haacke et al., Magnetic Resonance Imaging: Physical Principles and Sequence Design.
 */
export function shiftLines(
  lines: Float32Array,
  length: number,
  shiftPixels: number | ArrayLike<number>,
  centre = Math.floor(length / 2),
): Float32Array {
  const count = lines.length / (2 * length);
  if (!Number.isInteger(count))
    throw new RangeError(`${lines.length} floats are not whole lines of ${length} samples`);
  if (typeof shiftPixels !== "number" && shiftPixels.length !== count) {
    throw new RangeError(`${shiftPixels.length} shifts for ${count} lines`);
  }
  const out = new Float32Array(lines.length);
  const ramp = new Float64Array(2 * length);
  let rampShift = Number.NaN;
  for (let line = 0, at = 0; line < count; line++) {
    const shift = typeof shiftPixels === "number" ? shiftPixels : shiftPixels[line]!;
    if (shift !== rampShift) fillRamp(ramp, length, shift, centre);
    rampShift = shift;
    for (let j = 0; j < 2 * length; j += 2, at += 2) {
      const re = lines[at]!;
      const im = lines[at + 1]!;
      out[at] = re * ramp[j]! - im * ramp[j + 1]!;
      out[at + 1] = re * ramp[j + 1]! + im * ramp[j]!;
    }
  }
  return out;
}

/** `exp(-i 2 pi (j - centre) shift / length)`, interleaved, every factor from its own angle so that no error builds up. */
function fillRamp(ramp: Float64Array, length: number, shift: number, centre: number): void {
  for (let j = 0; j < length; j++) {
    const angle = (-2 * Math.PI * (j - centre) * shift) / length;
    ramp[2 * j] = Math.cos(angle);
    ramp[2 * j + 1] = Math.sin(angle);
  }
}

/**
 * Take a frequency off each line, in place: `exp(+i 2 pi f (echoSeconds + (j - centre) stepSeconds))`.
 * @param lines interleaved complex64, [line, coil, length], k ascending
 * @param offsetHz one for each line
 * @param echoSeconds of each line, time of k = 0
 * @param stepSeconds of each line, from one sample to the next; negative where it was read backward
 */
export function demodulateLines(
  lines: Float32Array,
  length: number,
  coils: number,
  offsetHz: ArrayLike<number>,
  echoSeconds: ArrayLike<number>,
  stepSeconds: ArrayLike<number>,
): void {
  const centre = Math.floor(length / 2);
  const factors = new Float64Array(2 * length);
  for (let line = 0, at = 0; line < offsetHz.length; line++) {
    const turn = 2 * Math.PI * offsetHz[line]!;
    for (let j = 0; j < length; j++) {
      const angle = turn * (echoSeconds[line]! + (j - centre) * stepSeconds[line]!);
      factors[2 * j] = Math.cos(angle);
      factors[2 * j + 1] = Math.sin(angle);
    }
    for (let coil = 0; coil < coils; coil++)
      for (let j = 0; j < factors.length; j += 2, at += 2) {
        const re = lines[at]!;
        const im = lines[at + 1]!;
        lines[at] = re * factors[j]! - im * factors[j + 1]!;
        lines[at + 1] = re * factors[j + 1]! + im * factors[j]!;
      }
  }
}
