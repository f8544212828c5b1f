import { InputError, UsageError } from "../errors.js";
import { isReversed, roleOf } from "../ingest/flags.js";
import type { RawFile } from "../ingest/raw-file.js";
import { driftBetween } from "../kernels/drift.js";
import type { Plan } from "./plan.js";
import type { Scan } from "./scan.js";

/**
 * How far the resonance had drifted at each image readout, in the order of the file, Hz: from the table that the
 * recipe names, or from navigator readouts, each compared with the first of its slice, echo and direction, and linear
 * in the order of the file between them.
 * @throws InputError for a table that does not fit; UsageError where the file has no navigators
 */
export function driftOf(raw: RawFile, scan: Scan, plan: Plan, blockRows: number): Float64Array | undefined {
  const { drift } = plan;
  if (drift === undefined) return undefined;
  const images = scan.index.roles.image;
  if (drift !== "navigators") {
    if (drift.data.length === images) return Float64Array.from(drift.data);
    throw new InputError(
      { file: drift.file, field: "shape", value: drift.shape.join(" x ") },
      `must hold one number for each of the ${images} image readouts, in the order of the file`,
      "Count them with: carillon inspect RAW",
    );
  }
  const { at, hz, imageRows } = readNavigators(raw, scan, blockRows);
  if (at.length === 0)
    throw new UsageError(
      { field: "shift-readout.drift", value: "navigators" },
      "the file has no navigator readouts",
      "Give a table: one number of Hz for each image readout, saved with numpy.save",
    );
  return interpolated(at, hz, imageRows);
}

function readNavigators(raw: RawFile, { facts }: Scan, blockRows: number) {
  const first = new Map<string, Float32Array>();
  const at: number[] = [];
  const hz: number[] = [];
  const imageRows: number[] = [];
  for (let start = 0; start < raw.readouts; start += blockRows)
    raw.readBlock(start, Math.min(blockRows, raw.readouts - start), (block) => {
      block.heads.forEach((head, row) => {
        if (head.encodingSpace !== facts.encoding) return;
        const role = roleOf(head, facts.calibrationMode);
        if (role === "image") imageRows.push(start + row);
        if (role !== "navigation") return;
        const samples = block.samples(row);
        const { slice, contrast } = head.counters;
        const key = [slice, contrast, isReversed(head), samples.length].join();
        const reference = first.get(key) ?? samples.slice();
        first.set(key, reference);
        // conjugated data turn in the other sense
        const sign = facts.overrides.conjugate ? -1 : 1;
        at.push(start + row);
        hz.push(sign * driftBetween(reference, samples, head.channels, head.dwellSeconds));
      });
    });
  return { at, hz, imageRows };
}

/** Linear between the known rows, constant before the first and after the last. */
function interpolated(at: readonly number[], hz: readonly number[], rows: readonly number[]): Float64Array {
  let next = 0;
  return Float64Array.from(rows, (row) => {
    while (next < at.length && at[next]! < row) next++;
    if (next === 0) return hz[0]!;
    if (next === at.length) return hz.at(-1)!;
    const share = (row - at[next - 1]!) / (at[next]! - at[next - 1]!);
    return hz[next - 1]! + share * (hz[next]! - hz[next - 1]!);
  });
}
