import { execute, executeFrom } from "./execute";
import { POINT, word } from "./lanes";
import { loadRun, loadWide, storeRun, storeWide } from "./lines";
import { PLAN_A, PLAN_B, PLAN_GAP, PLAN_LENGTH } from "./plan-layout";

/** Sixteen adjacent lines; see transformLines. */
function transformWide(
  plan: usize, x: usize, xStep: usize, xLength: usize, y: usize, yStep: usize, yLength: usize, re: usize, gain: v128,
): void {
  const n = word(plan, PLAN_LENGTH), im: usize = 16 - re, xHalf = xLength >> 1, yHalf = yLength >> 1;
  const a0 = word(plan, PLAN_A), gap = word(plan, PLAN_GAP), a1 = a0 + gap, a2 = a1 + gap, a3 = a2 + gap;
  loadWide(xLength - xHalf, x + xHalf * xStep, xStep, a0, gap, re, im);
  if (xLength < n) {
    const zero = (xLength - xHalf) * POINT, bytes = (n - xLength) * POINT;
    memory.fill(a0 + zero, 0, bytes);
    memory.fill(a1 + zero, 0, bytes);
    memory.fill(a2 + zero, 0, bytes);
    memory.fill(a3 + zero, 0, bytes);
  }
  loadWide(xHalf, x, xStep, a0 + (n - xHalf) * POINT, gap, re, im);
  // A result lies in the buffer it came from or in the spare one, which the next four lines then take the place of.
  let spare = word(plan, PLAN_B);
  const r0 = executeFrom(plan, a0, spare);
  if (r0 == spare) spare = a0;
  const r1 = executeFrom(plan, a1, spare);
  if (r1 == spare) spare = a1;
  const r2 = executeFrom(plan, a2, spare);
  if (r2 == spare) spare = a2;
  const r3 = executeFrom(plan, a3, spare);
  storeWide(yLength - yHalf, r0, r1, r2, r3, y + yHalf * yStep, yStep, re, im, gain);
  const tail = (n - yHalf) * POINT;
  storeWide(yHalf, r0 + tail, r1 + tail, r2 + tail, r3 + tail, y, yStep, re, im, gain);
}

/**
 * Centred transforms of `count` lines of interleaved complex64. Line i starts at `x + i xLane` and has `xLength` samples
 * `xStep` bytes apart; its result starts at `y + i yLane`. A sample at floor(length/2) is the centre; the rotations that
 * bring it to index 0, zero-filling and cropping are all in the two runs of each load and store. The inverse transform is
 * the forward one with real and imaginary parts swapped on the way in and out.
 * Each group of four lines is read whole before any of it is written, so x and y may be the same.
 */
export function transformLines(
  plan: usize, x: usize, xStep: usize, xLane: usize, xLength: usize,
  y: usize, yStep: usize, yLane: usize, yLength: usize, count: usize, inverse: bool, scale: f32,
): void {
  const n = word(plan, PLAN_LENGTH), a = word(plan, PLAN_A);
  const re: usize = inverse ? 16 : 0, im: usize = 16 - re, gain = f32x4.splat(scale);
  const xHalf = xLength >> 1, yHalf = yLength >> 1;
  if (xLane == 8 && yLane == 8 && word(plan, PLAN_GAP)) {
    for (; count >= 16; count -= 16, x += 128, y += 128) transformWide(plan, x, xStep, xLength, y, yStep, yLength, re, gain);
  }
  for (; count; x += 4 * xLane, y += 4 * yLane) {
    // Lanes without a line of their own repeat the first one.
    const one: usize = count > 1 ? 1 : 0, two: usize = count > 2 ? 2 : 0, three: usize = count > 3 ? 3 : 0;
    const x1 = one * xLane, x2 = two * xLane, x3 = three * xLane, y1 = one * yLane, y2 = two * yLane, y3 = three * yLane;
    loadRun(xLength - xHalf, x + xHalf * xStep, xStep, x1, x2, x3, a, re, im);
    memory.fill(a + (xLength - xHalf) * POINT, 0, (n - xLength) * POINT);
    loadRun(xHalf, x, xStep, x1, x2, x3, a + (n - xHalf) * POINT, re, im);
    const result = execute(plan);
    storeRun(yLength - yHalf, result, y + yHalf * yStep, yStep, y1, y2, y3, re, im, gain);
    storeRun(yHalf, result + (n - yHalf) * POINT, y, yStep, y1, y2, y3, re, im, gain);
    count = count > 4 ? count - 4 : 0;
  }
}
