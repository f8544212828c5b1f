import type { SampleMemory } from "./sample-memory.js";
import { mixingBytes, PIECE_BYTES } from "./simd-kernels.js";
import { simdModule } from "./simd-module.js";
import { PlanBook } from "./simd-plan.js";
import type { SimdPlace } from "./simd-transform.js";

/** What one worker will do, for the size of its private region. */
export interface SimdWork {
  /** Lengths of all its transforms. */
  readonly lengths: Iterable<number>;
  /** The most channels that it mixes. Default none. */
  readonly channels?: number;
}

/** Bytes of a private region in which the plans of all lengths stay, beside the other kernels' work space. */
export function regionBytes({ lengths, channels = 0 }: SimdWork): number {
  let bytes = 0;
  const take = (more: number) => {
    const address = Math.ceil(bytes / 64) * 64;
    bytes = address + more;
    return address;
  };
  // Written to nowhere, for the sum of what is taken.
  const book = new PlanBook({
    take,
    floats: (_address, count) => new Float32Array(count),
    words: (_address, count) => new Uint32Array(count),
  });
  for (const length of lengths) book.plan(length);
  take(Math.max(PIECE_BYTES, mixingBytes(channels, channels)));
  return bytes;
}

/**
 * What a worker needs for kernels of its own, ready to be posted: blocks of the memory that are taken here and belong to
 * the worker for as long as it lives.
 * @param samplesBytes for the arrays that the worker allocates; beyond it they lie in its own heap, and cost a copy
 * @throws RangeError when the memory has no room
 */
export function createSimdPlace(samples: SampleMemory, work: SimdWork, samplesBytes = 0): SimdPlace {
  const region = samples.allocate(Math.ceil(regionBytes(work) / 4));
  const part = samples.allocate(Math.ceil(samplesBytes / 4));
  return {
    module: simdModule(),
    memory: samples.memory,
    regionStart: region.byteOffset,
    regionBytes: region.byteLength,
    samplesStart: part.byteOffset,
    samplesBytes: part.byteLength,
  };
}
