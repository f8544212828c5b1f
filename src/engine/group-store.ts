import { UsageError } from "../errors.js";
import type { LinePlace } from "../ingest/place.js";
import type { SampleMemory } from "../kernels/sample-memory.js";
import type { ScanFacts } from "../physics/scan.js";
import { axisLength, floatCount } from "../stages/stage.js";
import { groupOf, type Plan } from "./plan.js";
import { Contradiction } from "./preview.js";

/** The k-space of one group while its lines arrive. */
export interface OpenGroup {
  readonly group: number;
  readonly data: Float32Array;
  /** [...frame axes, z, y]: how often each line came. */
  readonly counts: Uint16Array;
  /** Readouts that arrived (all-zero ones too), and of them those whose lines are in `data`. */
  arrived: number;
  placed: number;
  /** All readouts have arrived. */
  complete: boolean;
  /** Its stages have been asked for. */
  finishing: boolean;
}

/** Where a line goes: its group, and the byte address of its row of coil 0. */
export interface Destination {
  readonly open: OpenGroup;
  readonly byte: number;
  /** The line came before: rows are added to what is there, or replace it. */
  readonly again: boolean;
}

/**
 * The groups whose readouts are arriving. A group takes memory with its first readout and is complete with its last.
 * One for which there is no memory now waits for another pass over the file.
 */
export class GroupStore {
  readonly #plan: Plan;
  readonly #scan: ScanFacts;
  readonly #memory: SampleMemory;
  readonly #budgetBytes: number;
  readonly #expected: (group: number) => number;
  readonly #open = new Map<number, OpenGroup>();
  readonly #closed: Set<number>;
  readonly #finishedBefore: ReadonlySet<number>;
  readonly #deferred = new Set<number>();

  /**
   * @param expected readouts of a group
   * @param finished groups that earlier passes have done
   */
  constructor(
    plan: Plan,
    scan: ScanFacts,
    memory: SampleMemory,
    budgetBytes: number,
    expected: (group: number) => number,
    finished: ReadonlySet<number>,
  ) {
    this.#plan = plan;
    this.#scan = scan;
    this.#memory = memory;
    this.#budgetBytes = budgetBytes;
    this.#expected = expected;
    this.#closed = new Set(finished);
    this.#finishedBefore = finished;
  }

  /** Whether another group would not find memory now; what is under way may give some back. */
  get isTight(): boolean {
    return this.#memory.usedBytes + 4 * floatCount(this.#plan.placed) > this.#budgetBytes;
  }

  /** Groups that found no memory in this pass. */
  get deferred(): ReadonlySet<number> {
    return this.#deferred;
  }

  /** A readout arrives. Undefined where its group is done or waits for another pass. @throws Contradiction */
  arrive(at: LinePlace, isZero: boolean): Destination | OpenGroup | undefined {
    const { group, place } = groupOf(this.#scan, this.#plan.together, at.frame);
    const open = this.#groupFor(group);
    if (!open) return undefined;
    open.arrived++;
    if (open.arrived === this.#expected(group)) this.#close(open);
    if (isZero) {
      open.placed++;
      return open;
    }
    const { placed } = this.#plan;
    const z = axisLength(placed, "z");
    const y = axisLength(placed, "y");
    const slot = (place * z + at.z) * y + at.y;
    const again = open.counts[slot]! > 0;
    open.counts[slot] = again && this.#scan.overrides.duplicates === "mean" ? open.counts[slot]! + 1 : 1;
    const row = ((place * this.#scan.channels * z + at.z) * y + at.y) * axisLength(placed, "x");
    return { open, byte: open.data.byteOffset + 8 * row, again };
  }

  /** The groups whose readouts have not all arrived when the file ends. */
  closeRest(): OpenGroup[] {
    const rest = [...this.#open.values()];
    for (const open of rest) this.#close(open);
    return rest;
  }

  release(open: OpenGroup): void {
    this.#memory.release(open.data);
  }

  #close(open: OpenGroup): void {
    open.complete = true;
    this.#open.delete(open.group);
    this.#closed.add(open.group);
  }

  #groupFor(group: number): OpenGroup | undefined {
    const known = this.#open.get(group);
    if (known) return known;
    if (this.#finishedBefore.has(group) || this.#deferred.has(group)) return undefined;
    if (this.#closed.has(group)) throw new Contradiction("a readout for an image that seemed complete");
    const floats = floatCount(this.#plan.placed);
    if (this.#memory.usedBytes + 4 * floats > this.#budgetBytes) {
      if (this.#open.size === 0 && this.#closed.size === this.#finishedBefore.size)
        throw new UsageError(
          { field: "--memory" },
          `too little: one image needs ${Math.ceil((4 * floats) / 1e6)} MB of samples beside the blocks that are read`,
          this.#plan.together.includes("slice")
            ? "Allow more memory, or take slices one by one: --set field-map.through-slices=false"
            : "Allow more memory",
        );
      this.#deferred.add(group);
      return undefined;
    }
    const { placed, framesPerGroup } = this.#plan;
    const lines = framesPerGroup * axisLength(placed, "z") * axisLength(placed, "y");
    const open: OpenGroup = {
      group,
      data: this.#memory.allocate(floats),
      counts: new Uint16Array(lines),
      arrived: 0,
      placed: 0,
      complete: false,
      finishing: false,
    };
    this.#open.set(group, open);
    return open;
  }
}
