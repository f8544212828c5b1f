import { InputError } from "../errors.js";
import { FRAME_AXES, type FrameAxis } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { isReversed } from "./flags.js";
import type { ReadoutHead } from "./record.js";

/** Where a line lands: its frame (C order over FRAME_AXES) and its place in the frame's k-space, k = 0 at floor(N/2). */
export interface LinePlace {
  readonly frame: number;
  readonly y: number;
  readonly z: number;
}

/** The usable samples of a readout: stored indices [first, first + count), the encoded index of the lowest k among them. */
export interface SampleWindow {
  readonly first: number;
  readonly count: number;
  readonly encodedStart: number;
  readonly reversed: boolean;
}

/** Counters by frame axis after averaging: an axis that is averaged over counts as 0. */
export function frameCounter(head: ReadoutHead, axis: FrameAxis, averageOver: readonly FrameAxis[]): number {
  return averageOver.includes(axis) ? 0 : head.counters[axis];
}

/**
 * Index of the frame with these counters, and the line within it: encoded index = counter - centre + floor(N/2).
 * @throws InputError if a counter lies beyond the matrix or beyond the header's limits.
 */
export function placeLine(head: ReadoutHead, scan: ScanFacts, file: string): LinePlace {
  let frame = 0;
  for (const axis of FRAME_AXES) {
    const counter = frameCounter(head, axis, scan.overrides.averageOver);
    const length = scan.lengths[axis];
    if (counter >= length)
      throw new InputError(
        { file, field: `readout ${head.row}: ${axis}`, value: counter },
        `must be at most ${length - 1}, the limit in the header`,
        "Correct the header's encodingLimits",
      );
    frame = frame * length + counter;
  }
  const { matrix } = scan.encoded;
  const y = encodedLine(head, "kspace_encode_step_1", scan.center.y, matrix.y, file);
  const z = encodedLine(head, "kspace_encode_step_2", scan.center.z, matrix.z, file);
  return { frame, y, z };
}

function encodedLine(
  head: ReadoutHead,
  counter: "kspace_encode_step_1" | "kspace_encode_step_2",
  center: number,
  lines: number,
  file: string,
): number {
  const value = head.counters[counter];
  const index = value - center + Math.floor(lines / 2);
  if (index < 0 || index >= lines)
    throw new InputError(
      { file, field: `readout ${head.row}: ${counter}`, value },
      `lands at line ${index} of ${lines} (centre ${center}), beyond the encoded matrix`,
      "Correct the counters, the centre in encodingLimits, or the encoded matrix",
    );
  return index;
}

/** Whether a readout runs backward in time, by its flag or as the recipe's `scan` says. */
export function runsBackward(
  head: ReadoutHead,
  polarity: ScanFacts["overrides"]["readoutPolarity"],
): boolean {
  if (polarity === "header") return isReversed(head);
  if (polarity === "alternate") return head.counters.kspace_encode_step_1 % 2 === 1;
  return polarity === "reverse";
}

/**
 * The usable samples of a readout on the encoded grid. Samples are stored in time order; after reversal the centre
 * is `samples - 1 - center_sample`.
 * @param centerSample stored index of k = 0: the head's, or the measured one
 * @throws InputError if they reach beyond the encoded matrix
 */
export function sampleWindow(
  head: ReadoutHead,
  encodedSamples: number,
  reversed: boolean,
  centerSample: number,
  file: string,
): SampleWindow {
  const count = head.samples - head.discardPre - head.discardPost;
  const lowest = reversed ? head.discardPost : head.discardPre;
  const center = reversed ? head.samples - 1 - centerSample : centerSample;
  const encodedStart = lowest - center + Math.floor(encodedSamples / 2);
  if (count <= 0)
    throw new InputError(
      {
        file,
        field: `readout ${head.row}: discard_pre + discard_post`,
        value: head.discardPre + head.discardPost,
      },
      `must be below the ${head.samples} samples of the readout`,
      "Correct the file",
    );
  if (encodedStart < 0 || encodedStart + count > encodedSamples)
    throw new InputError(
      { file, field: `readout ${head.row}: center_sample`, value: centerSample },
      `puts ${count} samples at ${encodedStart} to ${encodedStart + count - 1} of ${encodedSamples} encoded`,
      centerSample === head.centerSample
        ? "Correct center_sample or the header's encoded matrix, or use scan: { centre: measured }"
        : `This is the measured centre, the file states ${head.centerSample}: leave scan: { centre: header }`,
    );
  return { first: head.discardPre, count, encodedStart, reversed };
}

/** Check what a head says of its payload against the payload. @throws InputError naming the readout. */
export function checkPayload(head: ReadoutHead, floats: number, file: string): void {
  const wanted = 2 * head.channels * head.samples;
  if (floats !== wanted)
    throw new InputError(
      { file, field: `readout ${head.row}: data`, value: `${floats} floats` },
      `must be ${wanted} (2 x ${head.channels} channels x ${head.samples} samples)`,
      "The file was cut or its head is wrong: export it again",
    );
}
