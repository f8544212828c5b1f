const ALIGNMENT_BYTES = 64;

/** Bytes of a memory that one thread alone may write. */
export interface RegionPlace {
  readonly regionStart: number;
  readonly regionBytes: number;
}

/** What plans are written into; a region, or one that only counts. */
export interface PlanSpace {
  /** Address of `bytes` fresh bytes, a multiple of 64. */
  take(bytes: number): number;
  floats(address: number, count: number): Float32Array;
  words(address: number, count: number): Uint32Array;
}

class RegionFull extends Error {}

/**
 * The part of the memory that belongs to one thread: transform plans with their scratch, and the kernels' work space.
 * Everything in it can be built again, so a full region is emptied and the work tried once more; what does not fit
 * even then asks `enlarge` for a larger place, or is an error. Nothing outside the region is ever written through it.
 */
export class PrivateRegion implements PlanSpace {
  private top: number;
  private readonly emptied: (() => void)[] = [];

  /** @param enlarge a new place of at least the bytes asked for, in exchange for the old one; never for workers */
  constructor(
    readonly memory: WebAssembly.Memory,
    private place: RegionPlace,
    private readonly enlarge?: (bytes: number) => RegionPlace,
  ) {
    this.top = place.regionStart;
    if (place.regionStart + place.regionBytes > memory.buffer.byteLength) {
      throw new RangeError("the private region ends beyond the memory");
    }
  }

  /** `forget` is called when everything taken from the region is gone. */
  onEmptied(forget: () => void): void {
    this.emptied.push(forget);
  }

  take(bytes: number): number {
    const { regionStart, regionBytes } = this.place;
    const address = Math.ceil(this.top / ALIGNMENT_BYTES) * ALIGNMENT_BYTES;
    if (address + bytes > regionStart + regionBytes) throw new RegionFull();
    this.top = address + bytes;
    return address;
  }

  floats(address: number, count: number): Float32Array {
    return new Float32Array(this.memory.buffer, address, count);
  }

  words(address: number, count: number): Uint32Array {
    return new Uint32Array(this.memory.buffer, address, count);
  }

  doubles(address: number, count: number): Float64Array {
    return new Float64Array(this.memory.buffer, address, count);
  }

  /**
   * Run `work`, which takes from the region, with as much room as there can be.
   * @throws RangeError when an empty region has too little room and cannot be enlarged
   */
  withRoom<T>(work: () => T): T {
    for (;;) {
      const fresh = this.top === this.place.regionStart;
      try {
        return work();
      } catch (error) {
        if (!(error instanceof RegionFull)) throw error;
        this.empty();
        if (fresh) this.place = this.larger();
        this.top = this.place.regionStart;
      }
    }
  }

  /** Run `use` on the address of `bytes` bytes that are free again afterwards. */
  borrow<T>(bytes: number, use: (address: number) => T): T {
    return this.withRoom(() => {
      const before = this.top;
      const address = this.take(bytes);
      try {
        return use(address);
      } finally {
        this.top = before;
      }
    });
  }

  private empty(): void {
    for (const forget of this.emptied) forget();
  }

  private larger(): RegionPlace {
    const { regionBytes } = this.place;
    if (this.enlarge) return this.enlarge(2 * regionBytes);
    throw new RangeError(`a private region of ${regionBytes} bytes is too small for this work; give it more`);
  }
}
