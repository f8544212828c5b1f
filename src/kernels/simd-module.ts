import { KERNELS_WASM } from "./generated/kernels-wasm.js";
import { isBufferOf } from "./sample-memory.js";
import type { PrivateRegion } from "./simd-region.js";

/** What the module exports; addresses, steps and lanes in bytes, lengths and counts in complex samples and lines. */
export interface SimdExports {
  transformLines(
    plan: number,
    x: number,
    xStep: number,
    xLane: number,
    xLength: number,
    y: number,
    yStep: number,
    yLane: number,
    yLength: number,
    count: number,
    inverse: boolean,
    scale: number,
  ): void;
  mixChannels(
    x: number,
    y: number,
    matrix: number,
    spans: number,
    work: number,
    lines: number,
    inChannels: number,
    outChannels: number,
    samples: number,
  ): void;
  multiplyAxis(
    x: number,
    y: number,
    window: number,
    count: number,
    inner: number,
    outer: number,
    block: number,
  ): void;
  addTo(y: number, x: number, count: number): void;
  scale(x: number, count: number, factor: number): void;
  swapWords(x: number, count: number): void;
  addEnergy(x: number, row: number, rows: number, profile: number, count: number): void;
  gatherTaps(
    grid: number,
    start: number,
    taps: number,
    y: number,
    rows: number,
    length: number,
    count: number,
  ): void;
  scatterTaps(
    grid: number,
    start: number,
    taps: number,
    x: number,
    rows: number,
    length: number,
    count: number,
  ): void;
  multiplyComplex(y: number, x: number, count: number): void;
  addWeighted(x: number, weights: number, y: number, count: number): void;
  rootSumOfSquares(x: number, y: number, outer: number, channels: number, inner: number): void;
}

let compiled: WebAssembly.Module | undefined;

/** Whether this JavaScript engine runs the module: WebAssembly with 128-bit SIMD and shared memory. */
export function simdSupported(): boolean {
  if (typeof WebAssembly !== "object" || typeof SharedArrayBuffer !== "function") return false;
  try {
    simdModule();
    return true;
  } catch {
    return false; // a CompileError: the module uses instructions that this engine does not know
  }
}

/** The module, compiled once a thread; a worker can be sent it instead. */
export function simdModule(): WebAssembly.Module {
  compiled ??= new WebAssembly.Module(decoded(KERNELS_WASM));
  return compiled;
}

function decoded(base64: string): Uint8Array {
  const text = atob(base64);
  const bytes = new Uint8Array(text.length);
  for (let i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i);
  return bytes;
}

/** One thread's instance of the module, with the memory it works on and the part of it that is its own. */
export class SimdInstance {
  readonly run: SimdExports;

  constructor(
    module: WebAssembly.Module,
    readonly region: PrivateRegion,
  ) {
    const instance = new WebAssembly.Instance(module, { env: { memory: region.memory } });
    // The module is built from src/kernels/assembly together with this file; the tests call every export.
    this.run = instance.exports as unknown as SimdExports;
  }

  /**
   * Address of an array that lies in the memory, else -1. A view made elsewhere before the memory last grew may be taken
   * for a foreign array: slower, with the same result.
   */
  readonly locate = (array: { readonly buffer: ArrayBufferLike; readonly byteOffset: number }): number =>
    isBufferOf(this.region.memory, array.buffer) ? array.byteOffset : -1;
}
