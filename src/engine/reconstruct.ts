import { decodeReadout } from "../ingest/decode.js";
import { roleOf } from "../ingest/flags.js";
import { type LinePlace, placeLine } from "../ingest/place.js";
import { DEFAULT_BLOCK_ROWS, RawFile, type ReadoutBlock } from "../ingest/raw-file.js";
import type { Kernels } from "../kernels/kernels.js";
import { FRAME_AXES } from "../physics/layout.js";
import { FrameStore, type OpenGroup } from "./frame-store.js";
import { type GroupResult, Pipeline } from "./pipeline.js";
import { groupOf, type Plan } from "./plan.js";
import type { Scan } from "./scan.js";

export interface ReconstructOptions {
  readonly kernels: Kernels;
  /** Whether results should hold the channel images before the last combination. */
  readonly keepCoils?: boolean;
  readonly blockRows?: number;
  readonly signal?: AbortSignal;
  readonly progress?: (done: number, total: number) => void;
}

/**
 * Run a plan over a raw file, block by block, and hand each group's result to `use` as soon as its readouts are
 * complete. The result's memory is valid only inside `use`. Groups come in the order in which the file completes them.
 * @throws InputError for a file that contradicts itself
 */
export async function reconstruct(
  scan: Scan,
  plan: Plan,
  options: ReconstructOptions,
  use: (group: number, result: GroupResult) => void,
): Promise<void> {
  const { kernels, keepCoils = false, blockRows = DEFAULT_BLOCK_ROWS } = options;
  const { transform } = kernels;
  const pipeline = new Pipeline(plan, scan.facts, kernels);
  const store = new FrameStore(plan, scan.facts, expectedReadouts(scan, plan), (floats) =>
    transform.allocate(floats),
  );
  const finish = (open: OpenGroup) => {
    const result = pipeline.runGroup(open.data, open.sampling, keepCoils);
    use(open.group, result);
    pipeline.release(result.result);
  };
  const raw = await RawFile.open(scan.file, scan.group);
  try {
    for (let first = 0; first < raw.readouts; first += blockRows) {
      const count = Math.min(blockRows, raw.readouts - first);
      raw.readBlock(first, count, (block) => {
        const places = imageLines(block, scan);
        if (places.length === 0) return;
        const { channels, encoded } = scan.facts;
        const perLine = 2 * channels * encoded.matrix.x;
        const data = transform.allocate(places.length * perLine);
        places.forEach(({ row }, i) =>
          decodeReadout(block.samples(row), block.heads[row]!, scan.facts, data, i * perLine, scan.file),
        );
        const lines = pipeline.runReadouts({
          data,
          lines: places.length,
          samples: encoded.matrix.x,
          coils: channels,
        });
        places.forEach(({ at }, i) => {
          const complete = store.place(lines, i, at);
          if (complete) finish(complete);
        });
        if (lines.data !== data) transform.release(lines.data);
        transform.release(data);
      });
      options.progress?.(first + count, raw.readouts);
      // Between blocks the event loop breathes: signals and progress are heard while the library works synchronously.
      await new Promise((resolve) => setImmediate(resolve));
      options.signal?.throwIfAborted();
    }
  } finally {
    raw.close();
  }
}

/** The readouts of a block that land in the image, and where; all-zero ones count as not acquired. */
function imageLines(block: ReadoutBlock, scan: Scan): { row: number; at: LinePlace }[] {
  const { facts } = scan;
  const lines: { row: number; at: LinePlace }[] = [];
  block.heads.forEach((head, row) => {
    if (head.encodingSpace !== facts.encoding || roleOf(head, facts.calibrationMode) !== "image") return;
    if (block.samples(row).every((value) => value === 0)) return;
    lines.push({ row, at: placeLine(head, facts, scan.file) });
  });
  return lines;
}

/** Readouts of each group, from the index. */
function expectedReadouts(scan: Scan, plan: Plan): Map<number, number> {
  const { facts, index } = scan;
  const expected = new Map<number, number>();
  for (const { counters, readouts } of index.frames.values()) {
    const frame = FRAME_AXES.reduce((at, axis) => at * facts.lengths[axis] + counters[axis], 0);
    const { group } = groupOf(facts, plan.together, frame);
    expected.set(group, (expected.get(group) ?? 0) + readouts);
  }
  return expected;
}
