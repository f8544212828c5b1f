import { Worker } from "node:worker_threads";
import { build } from "esbuild";
import { expect, it } from "vitest";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { createSimdKernels } from "../../src/kernels/simd-kernels.js";
import { createSimdPlace } from "../../src/kernels/simd-place.js";
import { seededSamples } from "./reference-transform.js";

/** The worker: kernels on the posted place, one transform of floats at a posted address, in place. */
const PROGRAM = `
import { parentPort, workerData } from "node:worker_threads";
import { createSimdKernels } from "./src/kernels/simd-kernels.js";
const { place, address, floats, outer, length } = workerData;
const data = new Float32Array(place.memory.buffer, address, floats);
const { transform } = createSimdKernels(place);
transform.transformAxis({ source: data, target: data, outer, length, inner: 1, inverse: true });
parentPort.postMessage(transform.instance.locate(data));
`;

it("a worker thread transforms in the memory of this one, on the posted module, with the same bits", async () => {
  const { outputFiles } = await build({
    stdin: { contents: PROGRAM, resolveDir: process.cwd() },
    bundle: true,
    write: false,
    format: "esm",
    platform: "node",
  });
  const samples = new SampleMemory();
  const kernels = createSimdKernels(samples);
  const [outer, length] = [9, 140];
  const data = kernels.transform.allocate(2 * outer * length);
  const source = seededSamples(data.length);
  data.set(source);
  const place = createSimdPlace(samples, { lengths: [length] });
  const worker = new Worker(new URL(`data:text/javascript,${encodeURIComponent(outputFiles[0]!.text)}`), {
    workerData: { place, address: data.byteOffset, floats: data.length, outer, length },
  });
  const address = await new Promise((resolve, reject) => {
    worker.once("message", resolve);
    worker.once("error", reject);
  });
  await worker.terminate();
  expect(address).toBe(data.byteOffset);
  const expected = new Float32Array(data.length);
  kernels.transform.transformAxis({ source, target: expected, outer, length, inner: 1, inverse: true });
  expect(data).toEqual(expected);
});
