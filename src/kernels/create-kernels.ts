import type { Kernels } from "./kernels.js";
import { createPlainKernels } from "./plain-kernels.js";
import type { SampleMemory } from "./sample-memory.js";
import { createSimdKernels } from "./simd-kernels.js";
import { simdSupported } from "./simd-module.js";
import type { SimdPlace } from "./simd-transform.js";

/** The fastest kernels that this JavaScript engine runs. */
export function createKernels(place?: SampleMemory | SimdPlace): Kernels {
  return simdSupported() ? createSimdKernels(place) : createPlainKernels();
}
