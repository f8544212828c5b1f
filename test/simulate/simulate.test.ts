import { execFileSync } from "node:child_process";
import { createHash } from "node:crypto";
import { mkdtempSync, readdirSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { setTimeout } from "node:timers/promises";
import { fileURLToPath } from "node:url";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { OutputError } from "../../src/errors.js";
import { acquire } from "../../src/simulate/acquire.js";
import { resolveAcquisition } from "../../src/simulate/acquisition.js";
import { type AcquisitionOptions, expectedImage, simulateRaw } from "../../src/simulate/index.js";
import { compileWithStandardLibrary, pythonWithH5py } from "./outside-programs.js";

const folder = mkdtempSync(join(tmpdir(), "carillon-simulate-"));
afterAll(() => rmSync(folder, { recursive: true, force: true }));
const beside = (name: string) => fileURLToPath(new URL(name, import.meta.url));

/** Everything at once: odd sizes, partial echo and Fourier, reversed echoes, averages, an oblique stack, noise readouts. */
const options = {
  matrix: { x: 21, y: 15 },
  fovMm: { x: 210, y: 180 },
  coils: 3,
  slices: 3,
  sliceSpacingMm: 8,
  echoTimesSeconds: [4e-3, 5.25e-3],
  reversedEchoes: "odd",
  repetitions: 2,
  averages: 2,
  dwellSeconds: 8e-6,
  fieldT: 3,
  offResonanceHz: 40,
  partialEcho: 0.8,
  partialFourier: 0.75,
  noise: { readouts: 2, samplesPerReadout: 30, dwellSeconds: 4e-6, relativeReceiverNoiseBandwidth: 0.79 },
  positionMm: [10, -20, 30],
  rotationDegrees: [10, 20, 30],
  seed: 7,
} as const satisfies AcquisitionOptions;

const HEAD_BYTES = 340;
const NOISE = 1n << 18n;
const REVERSE = 1n << 21n;
const LAST_IN_MEASUREMENT = 1n << 24n;

/** Heads and samples as the outside readers give them; offsets are those of the standard's packed head. */
function parse(bytes: Uint8Array) {
  const view = new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);
  const records = [];
  for (let at = 0; at < bytes.length; ) {
    const u16 = (offset: number) => view.getUint16(at + offset, true);
    const floats = (offset: number) => [0, 4, 8].map((i) => view.getFloat32(at + offset + i, true));
    const head = {
      version: u16(0),
      flags: view.getBigUint64(at + 2, true),
      scanCounter: view.getUint32(at + 14, true),
      samples: u16(34),
      available: u16(36),
      active: u16(38),
      mask: view.getBigUint64(at + 40, true),
      center: u16(172),
      sampleTimeUs: view.getFloat32(at + 178, true),
      position: floats(182),
      readDir: floats(194),
      step1: u16(242),
      average: u16(246),
      slice: u16(248),
      contrast: u16(250),
      repetition: u16(254),
    };
    const length = 8 * head.samples * head.active;
    const start = bytes.byteOffset + at + HEAD_BYTES;
    const samples = new Float32Array(bytes.buffer.slice(start, start + length));
    records.push({ head, samples });
    at += HEAD_BYTES + length;
  }
  return records;
}

const sha256 = (file: string) => createHash("sha256").update(readFileSync(file)).digest("hex");

describe("a simulated file", () => {
  const file = join(folder, "all.h5");
  const python = pythonWithH5py();
  beforeAll(async () => {
    await simulateRaw({ ...options, file });
  });

  test("read by h5py holds the samples, in the order and with the heads of the acquisition", (context) => {
    if (!python) return context.skip("needs a Python with h5py and NumPy");
    const out = join(folder, "h5py.bin");
    execFileSync(python, [beside("read_with_h5py.py"), file, out]);
    const records = parse(readFileSync(out));
    const readouts = [...acquire(resolveAcquisition(options))];
    const lines = 11; // 15 * 0.75, rounded
    const acquired = 34; // 42 * 0.8, rounded
    const noiseReadouts = options.noise.readouts;
    expect(records.length).toBe(noiseReadouts + 2 * 2 * lines * 3 * 2);
    for (const [i, { head, samples }] of records.entries()) {
      expect(samples).toEqual(readouts[i]?.samples);
      expect(head).toMatchObject({ version: 1, scanCounter: i, available: 3, active: 3, mask: 7n });
      if (i < noiseReadouts) {
        expect(head).toMatchObject({ flags: NOISE, samples: 30, sampleTimeUs: 4, center: 0 });
        continue;
      }
      const n = i - noiseReadouts;
      const reversed = n % 2 === 1;
      expect(head).toMatchObject({
        contrast: n % 2,
        slice: [0, 2, 1][Math.floor(n / 2) % 3],
        step1: Math.floor(n / 6) % lines,
        average: Math.floor(n / (6 * lines)) % 2,
        repetition: Math.floor(n / (12 * lines)),
        samples: acquired,
        sampleTimeUs: 8,
        center: reversed ? acquired - 1 - (21 - 8) : 21 - 8, // k = 0 is encoded sample 21; 8 are cut before
      });
      expect((head.flags & REVERSE) !== 0n).toBe(reversed);
      expect((head.flags & LAST_IN_MEASUREMENT) !== 0n).toBe(i === records.length - 1);
    }
    const middle = records.find(({ head }) => head.slice === 1);
    expect(middle?.head.position).toEqual([10, -20, 30]); // the middle slice of three
    // first column of Rz(30) Ry(20) Rx(10), computed with NumPy; float32 keeps 7 digits
    for (const [i, value] of [0.8137977, 0.4698463, -0.3420201].entries())
      expect(middle?.head.readDir[i]).toBeCloseTo(value, 6);
  });

  test("read by the standard's own library is the same to the bit, and its header is understood", (context) => {
    if (!python) return context.skip("needs a Python with h5py and NumPy");
    const program = join(folder, "read_with_standard_library");
    if (!compileWithStandardLibrary(beside("read_with_standard_library.cpp"), program))
      return context.skip("needs g++ and the raw-data standard's C++ library");
    const [ours, theirs] = [join(folder, "h5py-again.bin"), join(folder, "library.bin")];
    execFileSync(python, [beside("read_with_h5py.py"), file, ours]);
    const header = execFileSync(program, [file, theirs], { encoding: "utf8" });
    expect(readFileSync(theirs).equals(readFileSync(ours))).toBe(true);
    expect(header.trim().split("\n")).toEqual([
      "encoded 42 15 1 420 180 5",
      "recon 21 15 1 210 180 5",
      "kspace_encoding_step_1 0 10 3", // 4 of 15 lines are cut, k = 0 is line 7 of 15
      "slice 0 2 0",
      "contrast 0 1 0",
      "average 0 1 0",
      "repetition 0 1 0",
      "cartesian 1",
      "resonance 127732435",
      "channels 3",
      "field 3",
      "noise_bandwidth 0.79",
      "te 4",
      "te 5.25",
    ]);
  });

  test("states true facts", async () => {
    const { facts } = await simulateRaw({ ...options, file, overwrite: true });
    expect(facts).toMatchObject({
      imageReadouts: 264,
      noiseReadouts: 2,
      samplesPerReadout: 34,
      encodedSamples: 42,
    });
    expect(facts.bandwidthPerPixelHz).toBeCloseTo(1 / (42 * 8e-6), 6);
    expect(facts.fatShiftPixels).toBeCloseTo((-3.4e-6 * 127732435) / 2976.190476, 6);
    expect(facts.offResonanceShiftPixels).toBeCloseTo(40 / 2976.190476, 9);
  });
});

test.for([
  ["odd and partial", { ...options, noise: { sigma: 0 }, repetitions: 1 }],
  ["even and full", { matrix: { x: 24, y: 18 }, coils: 2, slices: 2, noise: { sigma: 0 } }],
] as const)(
  "NumPy's transform of a noise-free file gives the expected images: $0",
  async ([name, clean], context) => {
    const python = pythonWithH5py();
    if (!python) return context.skip("needs a Python with h5py and NumPy");
    const file = join(folder, `${name}.h5`);
    await simulateRaw({ ...clean, file });
    execFileSync(python, [beside("reconstruct_with_numpy.py"), file, `${file}.bin`]);
    const found = new Float64Array(new Uint8Array(readFileSync(`${file}.bin`)).buffer);
    const { coilImages } = expectedImage(clean);
    expect(found.length).toBe(coilImages.length);
    const largest = Math.max(...coilImages.map(Math.abs));
    const worst = Math.max(...found.map((value, i) => Math.abs(value - (coilImages[i] ?? Number.NaN))));
    expect(worst).toBeLessThan(1e-6 * largest); // the file's samples are complex64: 6e-8 each, averaged by the transform
  },
);

test("the same seed gives the same bytes at another time, another seed other bytes", async () => {
  const [first, second, other] = ["first.h5", "second.h5", "other.h5"].map((name) => join(folder, name)) as [
    string,
    string,
    string,
  ]; // three names, three paths
  await simulateRaw({ ...options, file: first });
  await setTimeout(3000); // HDF5 can stamp whole seconds into objects
  await simulateRaw({ ...options, file: second });
  await simulateRaw({ ...options, seed: 8, file: other });
  expect(sha256(second)).toBe(sha256(first));
  expect(sha256(other)).not.toBe(sha256(first));
}, 20000);

describe("an output", () => {
  const tiny = { matrix: { x: 8, y: 8 }, slices: 1, coils: 1 } as const;
  const partials = () => readdirSync(folder).filter((name) => name.endsWith(".partial"));

  test("that exists is kept, unless overwriting is allowed", async () => {
    const file = join(folder, "kept.h5");
    writeFileSync(file, "precious");
    await expect(simulateRaw({ ...tiny, file })).rejects.toThrow(OutputError);
    expect(readFileSync(file, "utf8")).toBe("precious");
    await simulateRaw({ ...tiny, file, overwrite: true });
    expect(readFileSync(file).subarray(1, 4).toString()).toBe("HDF");
    expect(partials()).toEqual([]);
  });

  test("in a folder that does not exist is an OutputError naming the file", async () => {
    const file = join(folder, "absent", "raw.h5");
    await expect(simulateRaw({ ...tiny, file })).rejects.toThrow(OutputError);
    await expect(simulateRaw({ ...tiny, file })).rejects.toThrow(file);
  });

  test("leaves nothing behind when it is interrupted", async () => {
    const file = join(folder, "interrupted.h5");
    const controller = new AbortController();
    const onProgress = () => controller.abort();
    const run = simulateRaw({ ...options, file, signal: controller.signal, onProgress });
    await expect(run).rejects.toThrow(/abort/i);
    expect(readdirSync(folder)).not.toContain("interrupted.h5");
    expect(partials()).toEqual([]);
  });

  test("reports its progress up to the whole", async () => {
    const steps: [number, number][] = [];
    const file = join(folder, "progress.h5");
    await simulateRaw({ ...options, file, onProgress: (written, total) => steps.push([written, total]) });
    expect(steps.at(-1)).toEqual([266, 266]);
    expect(steps.length).toBeGreaterThan(1);
  });
});
