import * as L from "./assembly/plan-layout.js";
import { chirp, chirpFilter, directTable, raderFilter, twiddles } from "./simd-constants.js";
import { chooseLength, type PassChoice, rootPowers } from "./simd-factors.js";
import type { PlanSpace } from "./simd-region.js";

/** Addresses of a plan that the module can run, and of its scratch: `length` points of four lines each. */
export interface Plan {
  readonly address: number;
  readonly scratchA: number;
  readonly scratchB: number;
  /** Whether the result ends in scratch B (else in A). */
  readonly endsInB: boolean;
}

interface Scratch {
  readonly a: number;
  readonly b: number;
  readonly gap: number;
}

/** Up to this length four times four lines are transformed together: their buffers stay in the second-level cache. */
const WIDE_LENGTH = 4096;

/** Writes plans, each length once: plans share the plans they are made of. */
export class PlanBook {
  private readonly plans = new Map<number, Plan>();

  constructor(private readonly space: PlanSpace) {}

  /** The plan of a length >= 1, written now if it is new. @throws when the space is full */
  plan(length: number): Plan {
    let plan = this.plans.get(length);
    if (!plan) {
      plan = this.write(length);
      this.plans.set(length, plan);
    }
    return plan;
  }

  /** Everything written is gone. */
  clear(): void {
    this.plans.clear();
  }

  private write(length: number): Plan {
    const choice = chooseLength(length);
    if ("convolution" in choice) return this.writeChirp(length, choice.convolution);
    const { passes } = choice;
    const rows: number[][] = [];
    let groups = length;
    let run = 1;
    for (const pass of passes) {
      groups /= pass.radix;
      rows.push(this.passRow(pass, groups, run));
      run *= pass.radix;
    }
    const scratch = this.scratch(length);
    const head = [L.KIND_PASSES, length, scratch.a, scratch.b, passes.length, 0, 0, scratch.gap];
    return plan(this.putWords([...head, ...rows.flat()]), scratch, passes.length % 2 === 1);
  }

  private passRow({ radix, method }: PassChoice, groups: number, run: number): number[] {
    const turns = groups > 1 ? this.putFloats(twiddles(radix, groups)) : 0;
    if (method === "direct") {
      const table = this.putFloats(directTable(radix));
      const work = this.space.take(radix * L.POINT_BYTES);
      return padded([L.METHOD_DIRECT, radix, groups, run, turns, table, work], L.PASS_WORDS);
    }
    if (method === "rader") {
      const powers = rootPowers(radix);
      const filter = this.putFloats(raderFilter(radix, powers));
      const convolution = this.plan(radix - 1).address;
      return [L.METHOD_RADER, radix, groups, run, turns, filter, convolution, this.putWords(powers)];
    }
    return padded([radix, radix, groups, run, turns], L.PASS_WORDS);
  }

  private writeChirp(length: number, convolution: number): Plan {
    const chirped = chirp(length);
    const scratch = this.scratch(length);
    const address = this.putWords([
      L.KIND_CHIRP,
      length,
      scratch.a,
      scratch.b,
      this.plan(convolution).address,
      this.putFloats(chirped),
      this.putFloats(chirpFilter(chirped, convolution)),
      scratch.gap,
    ]);
    return plan(address, scratch, false);
  }

  /** Buffers A and B; the extra line keeps them from falling on the same places of the cache for powers of two. */
  private scratch(length: number): Scratch {
    const bytes = length * L.POINT_BYTES + 128;
    const wide = length <= WIDE_LENGTH;
    const a = this.space.take(wide ? 4 * bytes : bytes);
    return { a, b: this.space.take(bytes), gap: wide ? bytes : 0 };
  }

  private putFloats(values: Float64Array): number {
    const address = this.space.take(4 * values.length);
    this.space.floats(address, values.length).set(values);
    return address;
  }

  private putWords(values: ArrayLike<number>): number {
    const address = this.space.take(4 * values.length);
    this.space.words(address, values.length).set(values);
    return address;
  }
}

function plan(address: number, { a, b }: Scratch, endsInB: boolean): Plan {
  return { address, scratchA: a, scratchB: b, endsInB };
}

function padded(words: number[], count: number): number[] {
  return [...words, ...new Array<number>(count - words.length).fill(0)];
}
