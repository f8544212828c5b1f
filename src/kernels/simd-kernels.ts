import * as elementwise from "./elementwise.js";
import * as energy from "./energy.js";
import { type Kernels, requireLength, wholeTimes } from "./kernels.js";
import { checkMixing, mixChannels, rowSpans } from "./mixing.js";
import type { SampleMemory } from "./sample-memory.js";
import type { SimdInstance } from "./simd-module.js";
import { createSimdEngine, type SimdEngine, type SimdPlace } from "./simd-transform.js";

/** Values of a window or profile that are brought into the memory at a time: half of a small first-level cache. */
const PIECE = 2048;
/** Room for one piece of float64. */
export const PIECE_BYTES = 8 * PIECE;

/**
 * The kernels in WebAssembly SIMD. Arrays outside the shared memory go through the plain kernels instead, which give
 * the same bits; the transforms take any array.
 * @param place the memory to allocate from, or what the thread that owns it has posted
 */
export function createSimdKernels(
  place?: SampleMemory | SimdPlace,
): Kernels & { readonly transform: SimdEngine } {
  const transform = createSimdEngine(place);
  const { instance } = transform;
  const multiply = multiplier(instance);
  return {
    id: "simd",
    transform,
    mixChannels: mixer(instance),
    multiplyAxis: multiply,
    multiplyGrid: (source, target, grid) => multiply(source, target, grid, 1),
    rootSumOfSquares: rooter(instance),
    magnitude: (source, target) => rooter(instance)(source, target, 1, 1, target.length),
    addEnergy: energyAdder(instance),
    ...elementwiseKernels(instance),
  };
}

/** Bytes that mixing between so many channels takes in the private region. */
export function mixingBytes(inChannels: number, outChannels: number): number {
  return 8 * outChannels * inChannels + 8 * outChannels + 64 * (inChannels + 1) + 3 * 64;
}

function mixer({ run, region, locate }: SimdInstance): Kernels["mixChannels"] {
  return (source, target, matrix, lines, inChannels, outChannels, samples) => {
    const x = locate(source);
    const y = locate(target);
    if (x < 0 || y < 0) return mixChannels(source, target, matrix, lines, inChannels, outChannels, samples);
    checkMixing(source, target, matrix, lines, inChannels, outChannels, samples);
    const spans = rowSpans(matrix, outChannels, inChannels).flatMap(({ from, to }) => [from, to]);
    region.borrow(mixingBytes(inChannels, outChannels), (work) => {
      const entries = work + 64 * (inChannels + 1);
      const ranges = entries + 4 * matrix.length;
      region.floats(entries, matrix.length).set(matrix);
      region.words(ranges, spans.length).set(spans);
      run.mixChannels(x, y, entries, ranges, work, lines, inChannels, outChannels, samples);
    });
  };
}

function multiplier({ run, region, locate }: SimdInstance): Kernels["multiplyAxis"] {
  return (source, target, window, inner) => {
    const x = locate(source);
    const y = locate(target);
    if (x < 0 || y < 0) return elementwise.multiplyAxis(source, target, window, inner);
    requireLength("target", target, source.length);
    const outer = wholeTimes("source", source.length, 2 * window.length * inner);
    region.borrow(PIECE_BYTES, (piece) => {
      for (let from = 0; from < window.length; from += PIECE) {
        const gains = window.subarray(from, from + PIECE);
        region.floats(piece, gains.length).set(gains);
        const skipped = 8 * from * inner;
        run.multiplyAxis(
          x + skipped,
          y + skipped,
          piece,
          gains.length,
          inner,
          outer,
          8 * window.length * inner,
        );
      }
    });
  };
}

function rooter({ run, locate }: SimdInstance): Kernels["rootSumOfSquares"] {
  return (source, target, outer, channels, inner) => {
    const x = locate(source);
    const y = locate(target);
    if (x < 0 || y < 0) return energy.rootSumOfSquares(source, target, outer, channels, inner);
    requireLength("source", source, 2 * outer * channels * inner);
    requireLength("target", target, outer * inner);
    run.rootSumOfSquares(x, y, outer, channels, inner);
  };
}

function energyAdder({ run, region, locate }: SimdInstance): Kernels["addEnergy"] {
  return (source, profile) => {
    const x = locate(source);
    if (x < 0) return energy.addEnergy(source, profile);
    const rows = wholeTimes("source", source.length, 2 * profile.length);
    return region.borrow(PIECE_BYTES, (piece) => {
      for (let from = 0; from < profile.length; from += PIECE) {
        const sums = profile.subarray(from, from + PIECE);
        const work = region.doubles(piece, sums.length);
        work.set(sums);
        run.addEnergy(x + 8 * from, 8 * profile.length, rows, piece, sums.length);
        sums.set(work);
      }
      return energy.allFinite(profile);
    });
  };
}

function elementwiseKernels({ run, locate }: SimdInstance): Pick<Kernels, "add" | "scale" | "swapWords"> {
  return {
    add(target, source) {
      const x = locate(source);
      const y = locate(target);
      if (x < 0 || y < 0) return elementwise.add(target, source);
      requireLength("source", source, target.length);
      run.addTo(y, x, target.length);
    },
    scale(data, factor) {
      const x = locate(data);
      if (x < 0) return elementwise.scale(data, factor);
      run.scale(x, data.length, factor);
    },
    swapWords(words) {
      const x = locate(words);
      if (x < 0) return elementwise.swapWords(words);
      run.swapWords(x, words.length);
    },
  };
}
