export { transformLines } from "./transform";
export { mixChannels } from "./mixing";
export { addTo, multiplyAxis, scale, swapWords } from "./elementwise";
export { addEnergy, rootSumOfSquares } from "./energy";
export { addWeighted, gatherTaps, multiplyComplex, scatterTaps } from "./warp";
