import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { createPlainEngine } from "../../src/kernels/plain-transform.js";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { createSimdPlace, regionBytes } from "../../src/kernels/simd-place.js";
import { createSimdEngine } from "../../src/kernels/simd-transform.js";
import type { AxisTransform } from "../../src/kernels/transform.js";
import { naiveTransform, relativeL2, seededSamples } from "./reference-transform.js";

// The sizes of scanners, and every way to transform: each kernel, direct radices from 11 to 37 alone and together (221),
// Rader (41, 251, 257, 1021), twice in one length (2501) and within another (389), Bluestein (179, 358).
const LENGTHS = [
  1, 2, 3, 4, 5, 6, 7, 8, 9, 11, 13, 16, 17, 19, 31, 37, 41, 63, 66, 91, 96, 105, 112, 116, 140, 179, 210,
  221, 251, 256, 257, 320, 358, 370, 372, 384, 389, 512, 1021, 2501,
];

// float32 work: rounding grows like sqrt(log2 n) times 2^-24 = 6e-8; 1e-6 leaves room for the two convolutions of
// Rader's and Bluestein's ways and is far below the error of any wrong twiddle (1/n at least).
const TOLERANCE = 1e-6;

const plain = createPlainEngine();
const simd = createSimdEngine();

type Job = Omit<AxisTransform, "target">;

function run(engine: Pick<typeof plain, "transformAxis">, job: Job): Float32Array {
  const target = new Float32Array(2 * job.outer * (job.outputLength ?? job.length) * job.inner);
  engine.transformAxis({ ...job, target });
  return target;
}

/** The same job with both arrays in the shared memory. */
function runInside(job: Job): Float32Array {
  const source = simd.allocate(job.source.length);
  const target = simd.allocate(2 * job.outer * (job.outputLength ?? job.length) * job.inner);
  source.set(job.source);
  simd.transformAxis({ ...job, source, target });
  const result = target.slice();
  simd.release(source);
  simd.release(target);
  return result;
}

describe("simd engine against the plain engine", () => {
  it.each(LENGTHS)("length %i, as rows and as columns, both directions", (length) => {
    for (const [outer, inner] of [
      [6, 1],
      [2, 21],
    ] as const) {
      for (const inverse of [false, true]) {
        const source = seededSamples(2 * outer * length * inner, length);
        const job = { source, outer, inner, length, inverse, scale: 1.25 };
        const result = runInside(job);
        expect(relativeL2(result, run(plain, job))).toBeLessThan(TOLERANCE);
        expect(run(simd, job)).toEqual(result); // arrays elsewhere: same bits
      }
    }
  });

  it("transforms a length whose columns are too long to take sixteen at a time", () => {
    const job = { source: seededSamples(2 * 5000 * 17), outer: 1, inner: 17, length: 5000, inverse: false };
    expect(relativeL2(runInside(job), run(plain, job))).toBeLessThan(TOLERANCE);
  });

  it.each([
    [16, 9, 16],
    [16, 16, 9],
    [15, 8, 6],
    [15, 7, 7],
    [37, 20, 31],
    [7, 1, 1],
    [4, 3, 2],
  ])("crops and zero-fills: length %i, input %i, output %i", (length, inputLength, outputLength) => {
    for (const [outer, inner] of [
      [5, 1],
      [2, 3],
      [5, 18],
    ] as const) {
      for (const inverse of [false, true]) {
        const source = seededSamples(2 * outer * inputLength * inner);
        const job = { source, outer, inner, length, inputLength, outputLength, inverse, scale: 2 };
        const result = runInside(job);
        expect(relativeL2(result, naiveTransform(job))).toBeLessThan(TOLERANCE);
        expect(run(simd, job)).toEqual(result);
      }
    }
  });
});

describe("simd engine, closed forms", () => {
  // [computed with NumPy/SciPy]: a unit sample at floor(N/2) transforms to the flat, real N^-1/2 for odd and even N.
  it.each([4, 5, 7, 8, 255, 256])("centre impulse, length %i", (length) => {
    const source = new Float32Array(2 * length);
    source[2 * Math.floor(length / 2)] = 1;
    const out = run(simd, { source, outer: 1, inner: 1, length, inverse: false });
    const flat = Float32Array.from(out, (_, f) => (f % 2 ? 0 : length ** -0.5));
    expect(relativeL2(out, flat)).toBeLessThan(TOLERANCE);
  });

  it.each([12, 37, 179, 256])("a single tone comes out as one sample of sqrt(n), length %i", (length) => {
    const centre = Math.floor(length / 2);
    for (const k of [0, centre, length - 1]) {
      const turns = (j: number) => (2 * Math.PI * (((j - centre) * (k - centre)) % length)) / length;
      const source = Float32Array.from({ length: 2 * length }, (_, f) =>
        f % 2 ? Math.sin(turns(f >> 1)) : Math.cos(turns(f >> 1)),
      );
      const out = run(simd, { source, outer: 1, inner: 1, length, inverse: false });
      const peak = new Float32Array(2 * length);
      peak[2 * k] = Math.sqrt(length);
      expect(relativeL2(out, peak)).toBeLessThan(TOLERANCE);
    }
  });

  const lengths = fc.integer({ min: 1, max: 600 });

  it("Parseval: keeps the energy of any line, and the inverse gives the line back", () => {
    fc.assert(
      fc.property(lengths, fc.integer(), (length, seed) => {
        const source = seededSamples(2 * length, seed);
        const job = { outer: 1, inner: 1, length };
        const there = run(simd, { ...job, source, inverse: false });
        const energy = (x: Float32Array) => x.reduce((sum, value) => sum + value * value, 0);
        // Energies differ by at most twice the relative error of the amplitudes.
        expect(Math.abs(energy(there) / energy(source) - 1)).toBeLessThan(2 * TOLERANCE);
        const back = run(simd, { ...job, source: there, inverse: true });
        expect(relativeL2(back, source)).toBeLessThan(2 * TOLERANCE);
      }),
      { numRuns: 40, seed: 7 },
    );
  });

  it("shift theorem: a cyclic shift by d is the phase ramp exp(-2 pi i k d / n)", () => {
    fc.assert(
      fc.property(lengths, fc.nat(599), (length, shift) => {
        const source = seededSamples(2 * length, length);
        const shifted = Float32Array.from(source, (_, f) => {
          const from = ((((f >> 1) - shift) % length) + length) % length;
          return source[2 * from + (f & 1)]!;
        });
        const job = { outer: 1, inner: 1, length, inverse: false };
        const a = run(simd, { ...job, source });
        const b = run(simd, { ...job, source: shifted });
        const ramped = Float64Array.from(a, (_, f) => {
          const turn = (-2 * Math.PI * ((((f >> 1) - Math.floor(length / 2)) * shift) % length)) / length;
          const [re, im] = [a[f & ~1]!, a[f | 1]!];
          return f % 2
            ? re * Math.sin(turn) + im * Math.cos(turn)
            : re * Math.cos(turn) - im * Math.sin(turn);
        });
        expect(relativeL2(b, ramped)).toBeLessThan(2 * TOLERANCE);
      }),
      { numRuns: 40, seed: 7 },
    );
  });
});

describe("simd engine, bits", () => {
  it.each([
    [37, 1, 1],
    [64, 3, 23],
    [91, 7, 2],
    [30, 1, 35],
    [12, 9, 3],
  ])("one line at a time equals all at once: length %i in [%i, length, %i]", (length, outer, inner) => {
    const source = seededSamples(2 * outer * length * inner, 3);
    const all = runInside({ source, outer, inner, length, inverse: true });
    for (let line = 0; line < outer * inner; line++) {
      const floats = Array.from({ length: 2 * length }, (_, f) => {
        const [o, i] = [Math.floor(line / inner), line % inner];
        return 2 * ((o * length + (f >> 1)) * inner + i) + (f & 1);
      });
      const alone = runInside({
        source: Float32Array.from(floats, (f) => source[f]!),
        outer: 1,
        inner: 1,
        length,
        inverse: true,
      });
      expect(alone).toEqual(Float32Array.from(floats, (f) => all[f]!));
    }
  });

  it("in place, and on views with a byte offset, in and out of the shared memory", () => {
    for (const [outer, length, inner] of [
      [3, 4, 5],
      [5, 9, 1],
      [1, 6, 19],
    ] as const) {
      const floats = 2 * outer * length * inner;
      const job = { source: seededSamples(floats), outer, inner, length, inverse: false };
      const expected = run(simd, job);
      for (const whole of [simd.allocate(floats + 6), new Float32Array(floats + 6)]) {
        const view = whole.subarray(3, 3 + floats);
        view.set(job.source);
        simd.transformAxis({ ...job, source: view, target: view });
        expect(view).toEqual(expected);
        expect([...whole.subarray(0, 3), ...whole.subarray(-3)]).toEqual([0, 0, 0, 0, 0, 0]);
      }
    }
  });

  it("leaves the source unchanged", () => {
    const source = simd.allocate(2 * 3 * 4 * 5);
    source.set(seededSamples(source.length));
    const copy = source.slice();
    run(simd, { source, outer: 3, inner: 5, length: 4, inverse: false });
    expect(source).toEqual(copy);
  });
});

describe("simd engine, memory", () => {
  const line = (length: number) => ({
    source: seededSamples(2 * length),
    outer: 1,
    inner: 1,
    length,
    inverse: false,
  });

  it("works from a posted place, with the same bits, and writes nothing outside it", () => {
    const samples = new SampleMemory();
    const before = samples.allocate(1024).fill(1);
    const place = createSimdPlace(samples, { lengths: [96, 37] }, 4096);
    const after = samples.allocate(1024).fill(2);
    const worker = createSimdEngine(place);
    expect(run(worker, line(96))).toEqual(run(simd, line(96)));
    expect(run(worker, line(37))).toEqual(run(simd, line(37)));
    const array = worker.allocate(512);
    expect(array.byteOffset).toBeGreaterThanOrEqual(place.samplesStart!);
    worker.release(array);
    expect(before.every((value) => value === 1) && after.every((value) => value === 2)).toBe(true);
  });

  it("plans anew when the region is full: lengths that do not fit together still work", () => {
    const samples = new SampleMemory();
    const lengths = [256, 257, 320];
    const bytes = Math.max(...lengths.map((length) => regionBytes({ lengths: [length] })));
    expect(bytes).toBeLessThan(regionBytes({ lengths }));
    const block = samples.allocate(bytes / 4);
    const place = {
      ...createSimdPlace(samples, { lengths: [] }),
      regionStart: block.byteOffset,
      regionBytes: bytes,
    };
    const engine = createSimdEngine(place);
    for (const length of [...lengths, ...lengths])
      expect(run(engine, line(length))).toEqual(run(simd, line(length)));
  });

  it("refuses a length that a worker's region cannot hold", () => {
    const place = createSimdPlace(new SampleMemory(), { lengths: [64] });
    const engine = createSimdEngine(place);
    expect(() => run(engine, line(4096))).toThrow("is too small for this work");
    expect(run(engine, line(64))).toEqual(run(simd, line(64)));
  });

  it("makes room on the thread that owns the memory, also for arrays made before it grew", () => {
    const samples = new SampleMemory();
    const engine = createSimdEngine(samples);
    const early = engine.allocate(64);
    early.set(seededSamples(64));
    const expected = run(simd, { source: early.slice(), outer: 1, inner: 1, length: 32, inverse: false });
    run(engine, line(200_000));
    expect(samples.memory.buffer.byteLength).toBeGreaterThan(64 * 200_000);
    expect(engine.instance.locate(early)).toBe(early.byteOffset);
    engine.transformAxis({ source: early, target: early, outer: 1, inner: 1, length: 32, inverse: false });
    expect(early).toEqual(expected);
  });

  it("refuses a region that ends beyond the memory", () => {
    const place = createSimdPlace(new SampleMemory(), { lengths: [4] });
    expect(() => createSimdEngine({ ...place, regionBytes: 1e9 })).toThrow("ends beyond the memory");
  });
});
