import type { Kernels } from "./kernels.js";
import type { SampleMemory } from "./sample-memory.js";
import { createSimdKernels } from "./simd-kernels.js";
import { simdSupported } from "./simd-module.js";

/** The kernels that were asked for; without a wish, or where SIMD is missing, the fastest that this engine runs. */
export async function createKernels(memory?: SampleMemory, wish?: Kernels["id"]): Promise<Kernels> {
  if (wish !== "plain" && simdSupported()) return createSimdKernels(memory);
  // Its library takes time to load, which most runs need not spend.
  return (await import("./plain-kernels.js")).createPlainKernels();
}
