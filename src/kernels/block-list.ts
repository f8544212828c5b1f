interface Block {
  start: number;
  bytes: number;
}

/** Blocks are whole cache lines, so that no two share one and every vector in them is aligned. */
const ALIGNMENT_BYTES = 64;

/**
 * Which bytes of a range are taken: blocks at multiples of 64, given back in any order, gaps joined. Addresses only; it
 * touches no memory. The same calls give the same addresses.
 */
export class BlockList {
  /** Gaps below `top`, by address, never touching one another. */
  private readonly gaps: Block[] = [];
  private readonly taken = new Map<number, number>();
  /** First byte that was never part of a block. */
  private unused: number;

  /** The range from `start` to `limit`, both in bytes. */
  constructor(
    start: number,
    readonly limit: number,
  ) {
    this.unused = Math.ceil(start / ALIGNMENT_BYTES) * ALIGNMENT_BYTES;
  }

  /** No block ever ended beyond this address. */
  get top(): number {
    return this.unused;
  }

  /** Address of a new block of at least `bytes` bytes; undefined when the range has no room for it. */
  take(bytes: number): number | undefined {
    const rounded = Math.max(1, Math.ceil(bytes / ALIGNMENT_BYTES)) * ALIGNMENT_BYTES;
    const start = this.takeGap(rounded) ?? this.takeTop(rounded);
    if (start !== undefined) this.taken.set(start, rounded);
    return start;
  }

  /** Give back the block at `start`. False when no block starts there. */
  give(start: number): boolean {
    const bytes = this.taken.get(start);
    if (bytes === undefined) return false;
    this.taken.delete(start);
    const after = this.gaps.findIndex((gap) => gap.start > start);
    const at = after < 0 ? this.gaps.length : after;
    this.gaps.splice(at, 0, { start, bytes });
    this.join(at);
    this.join(at - 1);
    return true;
  }

  /** Bytes in blocks, with what rounding added. */
  get usedBytes(): number {
    let sum = 0;
    for (const bytes of this.taken.values()) sum += bytes;
    return sum;
  }

  /** From the smallest gap that is large enough, the lowest of equals. */
  private takeGap(bytes: number): number | undefined {
    let best: Block | undefined;
    for (const gap of this.gaps) if (gap.bytes >= bytes && (!best || gap.bytes < best.bytes)) best = gap;
    if (!best) return undefined;
    const { start } = best;
    best.start += bytes;
    best.bytes -= bytes;
    if (best.bytes === 0) this.gaps.splice(this.gaps.indexOf(best), 1);
    return start;
  }

  private takeTop(bytes: number): number | undefined {
    const start = this.unused;
    if (start + bytes > this.limit) return undefined;
    this.unused += bytes;
    return start;
  }

  /** Make the gaps at `index` and `index + 1` one if they touch. */
  private join(index: number): void {
    const gap = this.gaps[index];
    const next = this.gaps[index + 1];
    if (!gap || !next || gap.start + gap.bytes !== next.start) return;
    gap.bytes += next.bytes;
    this.gaps.splice(index + 1, 1);
  }
}
