import fc from "fast-check";
import { describe, expect, it } from "vitest";
import { SampleMemory, SamplePart } from "../../src/kernels/sample-memory.js";

describe("SampleMemory", () => {
  it("hands out zeroed blocks at multiples of 64 bytes, again zeroed after reuse", () => {
    const samples = new SampleMemory();
    const first = samples.allocate(17).fill(3);
    const second = samples.allocate(5);
    expect([first.byteOffset % 64, second.byteOffset % 64]).toEqual([0, 0]);
    expect(second.byteOffset).toBeGreaterThanOrEqual(first.byteOffset + first.byteLength);
    samples.release(first);
    const again = samples.allocate(20);
    expect(again.byteOffset).toBe(first.byteOffset);
    expect(again.every((value) => value === 0)).toBe(true);
  });

  it("joins gaps on either side, so that the whole can be taken as one", () => {
    const samples = new SampleMemory();
    const blocks = [0, 1, 2, 3].map(() => samples.allocate(16));
    for (const index of [0, 2, 1]) samples.release(blocks[index]!);
    expect(samples.allocate(48).byteOffset).toBe(blocks[0]!.byteOffset);
  });

  it("grows when needed; views made before stay good", () => {
    const samples = new SampleMemory({ initialBytes: 65536 });
    const early = samples.allocate(4).fill(7);
    const late = samples.allocate(100_000);
    late[99_999] = 1;
    expect(samples.memory.buffer.byteLength).toBeGreaterThan(400_000);
    expect([...early]).toEqual([7, 7, 7, 7]);
    samples.release(early);
    samples.release(late);
    expect(samples.usedBytes).toBe(0);
  });

  it("refuses what exceeds its maximum and works on", () => {
    const samples = new SampleMemory({ maximumBytes: 131_072 });
    expect(() => samples.allocate(40_000)).toThrow("no room for 160000 bytes: 0 of 131072 bytes");
    expect(samples.allocate(1000).length).toBe(1000);
  });

  it("refuses to release what it did not give, and twice", () => {
    const samples = new SampleMemory();
    const block = samples.allocate(32);
    expect(() => samples.release(block.subarray(16))).toThrow("no block");
    expect(() => samples.release(new Float32Array(samples.memory.buffer.byteLength))).toThrow("no block");
    samples.release(block);
    expect(() => samples.release(block)).toThrow("no block");
  });

  it("never gives two blocks the same byte, whatever the order of calls", () => {
    const steps = fc.array(fc.tuple(fc.boolean(), fc.nat(300)), { maxLength: 80 });
    fc.assert(
      fc.property(steps, (calls) => {
        const samples = new SampleMemory();
        const live: Float32Array[] = [];
        calls.forEach(([take, number], index) => {
          if (take || live.length === 0) live.push(samples.allocate(number).fill(index));
          else samples.release(live.splice(number % live.length, 1)[0]!);
          for (const block of live) expect(block.every((value) => value === block[0])).toBe(true);
        });
        const ranges = live.map(
          ({ byteOffset, byteLength }) => [byteOffset, byteOffset + byteLength] as const,
        );
        ranges.sort((a, b) => a[0] - b[0]);
        for (let i = 1; i < ranges.length; i++)
          expect(ranges[i]![0]).toBeGreaterThanOrEqual(ranges[i - 1]![1]);
      }),
      { numRuns: 50, seed: 11 },
    );
  });
});

describe("SamplePart", () => {
  it("hands out its range, then arrays of its own, and takes both back", () => {
    const samples = new SampleMemory();
    const range = samples.allocate(64);
    const part = new SamplePart(samples.memory, range.byteOffset, range.byteLength);
    const inside = part.allocate(48);
    const outside = part.allocate(48);
    expect(inside.byteOffset).toBe(range.byteOffset);
    expect(inside.buffer).toBe(samples.memory.buffer);
    expect(outside.buffer).not.toBe(samples.memory.buffer);
    part.release(outside);
    part.release(inside);
    expect(() => part.release(inside)).toThrow("no block");
  });
});
