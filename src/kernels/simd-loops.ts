import { PLAIN_LOOPS } from "./plain-loops.js";
import type { SimdInstance } from "./simd-module.js";
import type { Loops, Taps } from "./transform.js";

/** Memory that arrays are brought into. */
interface Memory {
  allocate(floats: number, zeroed?: boolean): Float32Array;
  release(array: Float32Array): void;
}

/** Arrays that stay in the memory: those of the plans in use, which serve many images one after the other. */
const KEPT = 12;

/** The loops in WebAssembly SIMD; the plain ones where there is no room in the memory. */
export function createSimdLoops({ run, locate }: SimdInstance, memory: Memory): Loops {
  const kept = new Kept(memory);
  /** Call with the addresses of taps and values, which are copied in where they lie elsewhere. */
  const warp = (
    grid: Float32Array,
    taps: Taps,
    values: Float32Array,
    isTarget: boolean,
    call: (grid: number, start: number, taps: number, values: number) => void,
  ): boolean => {
    const isInside = locate(values) >= 0;
    const inside = isInside ? values : memory.allocate(values.length, false);
    const addresses = [grid, kept.of(taps.start), kept.of(taps.taps), inside].map(locate) as [
      number,
      number,
      number,
      number,
    ];
    const canRun = addresses.every((address) => address >= 0);
    if (canRun) {
      if (!isInside && !isTarget) inside.set(values);
      call(...addresses);
      if (!isInside && isTarget) values.set(inside);
    }
    if (!isInside) memory.release(inside);
    return canRun;
  };
  return {
    gatherTaps(grid, taps, rows, target) {
      const isDone = warp(grid, taps, target, true, (g, s, t, y) =>
        run.gatherTaps(g, s, t, y, rows, grid.length / (2 * rows), taps.start.length / rows),
      );
      if (!isDone) PLAIN_LOOPS.gatherTaps(grid, taps, rows, target);
    },
    scatterTaps(grid, taps, rows, values) {
      const isDone = warp(grid, taps, values, false, (g, s, t, x) =>
        run.scatterTaps(g, s, t, x, rows, grid.length / (2 * rows), taps.start.length / rows),
      );
      if (!isDone) PLAIN_LOOPS.scatterTaps(grid, taps, rows, values);
    },
    multiplyComplex(values, factors) {
      const [y, x] = [locate(values), locate(kept.of(factors))];
      if (x < 0 || y < 0) PLAIN_LOOPS.multiplyComplex(values, factors);
      else run.multiplyComplex(y, x, values.length / 2);
    },
    scaleRows(rows, gain) {
      const [y, x] = [locate(rows), locate(kept.of(gain))];
      if (x < 0 || y < 0) PLAIN_LOOPS.scaleRows(rows, gain);
      else run.multiplyAxis(y, y, x, gain.length, 1, rows.length / (2 * gain.length), 8 * gain.length);
    },
    addWeighted(source, from, weights, target, to) {
      const [x, w, y] = [locate(source), locate(weights), locate(target)];
      if (x < 0 || w < 0 || y < 0) PLAIN_LOOPS.addWeighted(source, from, weights, target, to);
      else run.addWeighted(x + 4 * from, w, y + 4 * to, weights.length / 2);
    },
  };
}

/** Copies of arrays in the memory, the oldest given back for a new one. The arrays must not change. */
class Kept {
  readonly #copies = new Map<Float32Array | Int32Array, Float32Array>();

  constructor(private readonly memory: Memory) {}

  of(array: Float32Array | Int32Array): Float32Array {
    const known = this.#copies.get(array);
    if (known) return known;
    if (this.#copies.size === KEPT) {
      const [oldest, copy] = this.#copies.entries().next().value!; // there are some
      this.#copies.delete(oldest);
      this.memory.release(copy);
    }
    const copy = this.memory.allocate(array.length, false);
    new Uint32Array(copy.buffer, copy.byteOffset, copy.length).set(
      new Uint32Array(array.buffer, array.byteOffset, array.length),
    );
    this.#copies.set(array, copy);
    return copy;
  }
}
