import { describe, expect, it } from "vitest";
import { SampleMemory } from "../../src/kernels/sample-memory.js";
import { unitRoot } from "../../src/kernels/simd-constants.js";
import { chooseLength, radices, rootPowers } from "../../src/kernels/simd-factors.js";
import { PrivateRegion } from "../../src/kernels/simd-region.js";

describe("constants", () => {
  it("unitRoot is exact at quarter turns and right to the last bits elsewhere", () => {
    const quarters = [0, 3, 6, 9, -3].map((k) => unitRoot(k, 12).map((value) => value + 0)); // + 0: no minus zero
    expect(quarters).toEqual([
      [1, 0],
      [0, -1],
      [-1, 0],
      [0, 1],
      [0, 1],
    ]);
    for (const n of [7, 12, 1021]) {
      for (let k = 0; k < n; k++) {
        const [re, im] = unitRoot(k, n);
        // Math.cos and Math.sin of an unreduced angle up to 2 pi err by its rounding, 4.4e-16, and one of their own.
        expect(Math.abs(re - Math.cos((2 * Math.PI * k) / n))).toBeLessThan(1e-15);
        expect(Math.abs(im + Math.sin((2 * Math.PI * k) / n))).toBeLessThan(1e-15);
      }
    }
  });
});

describe("factors", () => {
  it.each([1, 2, 6, 8, 96, 128, 251, 358, 370, 384, 1021, 2501])(
    "radices multiply to the length: %i",
    (length) => {
      const factors = radices(length);
      expect(factors.reduce((product, factor) => product * factor, 1)).toBe(length);
      expect(factors.every((factor) => [2, 4, 8].includes(factor) || factor % 2 === 1)).toBe(true);
    },
  );

  it("takes each way where it belongs", () => {
    expect(chooseLength(384)).toEqual({ passes: [8, 4, 4, 3].map((radix) => ({ radix, method: "kernel" })) });
    expect(chooseLength(31)).toEqual({ passes: [{ radix: 31, method: "direct" }] });
    expect(chooseLength(257)).toEqual({ passes: [{ radix: 257, method: "rader" }] });
    expect(chooseLength(179)).toEqual({ convolution: 384 }); // 178 = 2 x 89: two Raders, one in the other, cost more
  });

  it.each([11, 37, 179, 257])("the powers of the root visit every residue once, prime %i", (prime) => {
    const powers = rootPowers(prime);
    expect([...powers].sort((a, b) => a - b)).toEqual(Array.from({ length: prime - 1 }, (_, i) => i + 1));
    for (let j = 1; j < prime - 1; j++) expect(powers[j]).toBe((powers[j - 1]! * powers[1]!) % prime);
  });
});

describe("private region", () => {
  const samples = new SampleMemory();
  const block = samples.allocate(64);
  const place = { regionStart: block.byteOffset, regionBytes: block.byteLength };

  it("empties itself once for work that does not fit beside what is there", () => {
    const region = new PrivateRegion(samples.memory, place);
    let forgotten = 0;
    region.onEmptied(() => forgotten++);
    expect(region.withRoom(() => region.take(128))).toBe(block.byteOffset);
    expect(region.withRoom(() => region.take(192))).toBe(block.byteOffset);
    expect(forgotten).toBe(1);
    expect(() => region.withRoom(() => region.take(257))).toThrow("256 bytes is too small");
  });

  it("gives borrowed bytes back, also after an error, and lets errors of the work through", () => {
    const region = new PrivateRegion(samples.memory, place);
    const first = region.borrow(100, (address) => address);
    expect(() =>
      region.borrow(100, () => {
        throw new Error("the work's own");
      }),
    ).toThrow("the work's own");
    expect(region.take(8)).toBe(first);
  });

  it("asks its owner for more", () => {
    const asked: number[] = [];
    const region = new PrivateRegion(samples.memory, place, (bytes) => {
      asked.push(bytes);
      return { regionStart: samples.allocate(bytes / 4).byteOffset, regionBytes: bytes };
    });
    region.withRoom(() => region.take(700));
    expect(asked).toEqual([512, 1024]);
  });
});
