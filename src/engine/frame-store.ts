import type { LinePlace } from "../ingest/place.js";
import type { ScanFacts } from "../physics/scan.js";
import { axisLength, floatCount, type ReadoutLines, type Sampling } from "../stages/stage.js";
import { groupOf, type Plan } from "./plan.js";

/** The k-space of one group while its lines arrive. */
export interface OpenGroup {
  readonly group: number;
  readonly data: Float32Array;
  readonly sampling: Sampling;
  /** Readouts still to come. */
  pending: number;
}

/**
 * Places lines into the k-space of their group, in file order: a line that comes again is added (and divided by its
 * count when the group is complete) or replaces the one before.
 */
export class FrameStore {
  readonly #plan: Plan;
  readonly #scan: ScanFacts;
  readonly #expected: ReadonlyMap<number, number>;
  readonly #allocate: (floats: number) => Float32Array;
  readonly #open = new Map<number, OpenGroup>();

  /** @param expected readouts of each group, from the scan's index */
  constructor(
    plan: Plan,
    scan: ScanFacts,
    expected: ReadonlyMap<number, number>,
    allocate: (floats: number) => Float32Array,
  ) {
    this.#plan = plan;
    this.#scan = scan;
    this.#expected = expected;
    this.#allocate = allocate;
  }

  /** Place line `i` of a block. Returns the group if that completed it; the store then forgets it. */
  place(lines: ReadoutLines, i: number, at: LinePlace): OpenGroup | undefined {
    const { group, place } = groupOf(this.#scan, this.#plan.together, at.frame);
    let open = this.#open.get(group);
    if (!open) this.#open.set(group, (open = this.#begin(group)));
    const { placed } = this.#plan;
    const [coils, z, y, x] = (["coil", "z", "y", "x"] as const).map((axis) => axisLength(placed, axis)) as [
      number,
      number,
      number,
      number,
    ];
    const slot = (place * z + at.z) * y + at.y;
    const count = open.sampling.counts[slot]!;
    const add = count > 0 && this.#scan.overrides.duplicates === "mean";
    for (let coil = 0; coil < coils; coil++) {
      const from = 2 * (i * coils + coil) * x;
      const to = 2 * (((place * coils + coil) * z + at.z) * y + at.y) * x;
      const row = lines.data.subarray(from, from + 2 * x);
      if (!add) open.data.set(row, to);
      else for (let j = 0; j < row.length; j++) open.data[to + j]! += row[j]!;
    }
    open.sampling.counts[slot] = add ? count + 1 : 1;
    open.pending--;
    if (open.pending > 0) return undefined;
    this.#open.delete(group);
    this.#average(open);
    return open;
  }

  #begin(group: number): OpenGroup {
    const { placed, framesPerGroup } = this.#plan;
    const lines = framesPerGroup * axisLength(placed, "z") * axisLength(placed, "y");
    return {
      group,
      data: this.#allocate(floatCount(placed)),
      sampling: { counts: new Uint16Array(lines) },
      pending: this.#expected.get(group) ?? 0,
    };
  }

  /** Lines that were added become means. */
  #average({ data, sampling }: OpenGroup): void {
    const { placed, framesPerGroup } = this.#plan;
    const coils = axisLength(placed, "coil");
    const lines = axisLength(placed, "z") * axisLength(placed, "y");
    const row = 2 * axisLength(placed, "x");
    for (let frame = 0; frame < framesPerGroup; frame++)
      for (let line = 0; line < lines; line++) {
        const count = sampling.counts[frame * lines + line]!;
        if (count < 2) continue;
        for (let coil = 0; coil < coils; coil++) {
          const start = ((frame * coils + coil) * lines + line) * row;
          for (let j = start; j < start + row; j++) data[j]! /= count;
        }
      }
  }
}
