import { BlockList } from "./block-list.js";

/** WebAssembly memories grow by pages of 64 KiB. */
const PAGE_BYTES = 65536;
/** One page short of 4 GiB, so that the end of every array is a 32-bit address too. */
const MOST_PAGES = 65535;

/** Which memory a buffer shows. A memory that grows gets a new buffer; views on the old one stay good. */
const memories = new WeakMap<ArrayBufferLike, WebAssembly.Memory>();

/** The memory's buffer as it is now, known from here on as this memory's. */
export function currentBuffer(memory: WebAssembly.Memory): ArrayBufferLike {
  const { buffer } = memory;
  memories.set(buffer, memory);
  return buffer;
}

/** Whether a buffer is one that `memory` has, or had when an array was last made on it. */
export function isBufferOf(memory: WebAssembly.Memory, buffer: ArrayBufferLike): boolean {
  return memories.get(buffer) === memory || currentBuffer(memory) === buffer;
}

/** Where arrays for the kernels come from. */
export interface SampleSource {
  /** @param zeroed whether every float must be 0; else they may hold anything (default: zeroed) */
  allocate(floats: number, zeroed?: boolean): Float32Array;
  /** Give back what `allocate` gave. */
  release(array: Float32Array): void;
}

/**
 * One shared WebAssembly memory for samples, handed out in blocks at multiples of 64 bytes: views that the SIMD kernels
 * work on without a copy, in this thread and in workers. Only the thread that made it allocates, releases and grows;
 * workers get addresses, or a SamplePart of their own. Views stay valid when the memory grows.
 */
export class SampleMemory implements SampleSource {
  readonly memory: WebAssembly.Memory;
  private readonly blocks: BlockList;

  /**
   * @param initialBytes committed at once; the memory grows when more is asked for
   * @param maximumBytes never exceeded; at most 4 GiB less 64 KiB
   */
  constructor({ initialBytes = PAGE_BYTES, maximumBytes = MOST_PAGES * PAGE_BYTES } = {}) {
    const maximum = Math.min(MOST_PAGES, Math.ceil(maximumBytes / PAGE_BYTES));
    const initial = Math.max(1, Math.min(maximum, Math.ceil(initialBytes / PAGE_BYTES)));
    this.memory = new WebAssembly.Memory({ initial, maximum, shared: true });
    this.blocks = new BlockList(1, maximum * PAGE_BYTES); // address 0 stays unused
  }

  /** @throws RangeError when the memory's maximum leaves no room, or the system gives no more */
  allocate(floats: number, zeroed = true): Float32Array {
    const top = this.blocks.top;
    const start = this.blocks.take(4 * floats);
    if (start === undefined) {
      const { usedBytes, limit } = this.blocks;
      throw new RangeError(
        `no room for ${4 * floats} bytes: ${usedBytes} of ${limit} bytes of sample memory are in use`,
      );
    }
    const lacking = this.blocks.top - this.memory.buffer.byteLength;
    if (lacking > 0) this.memory.grow(Math.ceil(lacking / PAGE_BYTES));
    const array = new Float32Array(currentBuffer(this.memory), start, floats);
    return start >= top || !zeroed ? array : array.fill(0); // what was never handed out is zero already
  }

  /** @throws RangeError for an array that `allocate` did not give, or that was given back before */
  release(array: Float32Array): void {
    if (!isBufferOf(this.memory, array.buffer) || !this.blocks.give(array.byteOffset)) {
      throw new RangeError(`no block of the sample memory starts at byte ${array.byteOffset}`);
    }
  }

  /** Bytes handed out now, with what rounding to cache lines added. */
  get usedBytes(): number {
    return this.blocks.usedBytes;
  }
}

/** A range of a sample memory that one thread may hand out to itself; beyond it, arrays of its own heap. */
export class SamplePart implements SampleSource {
  private readonly blocks: BlockList;

  constructor(
    private readonly memory: WebAssembly.Memory,
    startByte: number,
    bytes: number,
  ) {
    this.blocks = new BlockList(startByte, startByte + bytes);
  }

  allocate(floats: number, zeroed = true): Float32Array {
    const start = this.blocks.take(4 * floats);
    // The kernels take any array; one outside the memory costs them a copy.
    if (start === undefined) return new Float32Array(floats);
    const array = new Float32Array(currentBuffer(this.memory), start, floats);
    return zeroed ? array.fill(0) : array;
  }

  /** @throws RangeError for a part of the memory that `allocate` did not give, or that was given back before */
  release(array: Float32Array): void {
    if (isBufferOf(this.memory, array.buffer) && !this.blocks.give(array.byteOffset)) {
      throw new RangeError(`no block of this thread starts at byte ${array.byteOffset}`);
    }
  }
}
