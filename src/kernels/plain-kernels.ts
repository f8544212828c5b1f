import { add, multiplyAxis, scale, swapWords } from "./elementwise.js";
import { addEnergy, rootSumOfSquares } from "./energy.js";
import type { Kernels } from "./kernels.js";
import { mixChannels } from "./mixing.js";
import { createPlainEngine } from "./plain-transform.js";

/** The kernels in plain TypeScript: for engines without WebAssembly SIMD, and the reference of the others. */
export function createPlainKernels(): Kernels {
  return {
    id: "plain",
    transform: createPlainEngine(),
    mixChannels,
    multiplyAxis,
    multiplyGrid: (source, target, grid) => multiplyAxis(source, target, grid, 1),
    rootSumOfSquares,
    magnitude: (source, target) => rootSumOfSquares(source, target, 1, 1, target.length),
    add,
    scale,
    addEnergy,
    swapWords,
  };
}
