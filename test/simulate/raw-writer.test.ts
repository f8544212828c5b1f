import { mkdtempSync, readdirSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { afterAll, expect, test } from "vitest";
import { OutputError } from "../../src/errors.js";
import { type HeadValues, type RawReadout, writeRaw } from "../../src/simulate/raw-writer.js";

const folder = mkdtempSync(join(tmpdir(), "carillon-raw-writer-"));
afterAll(() => rmSync(folder, { recursive: true, force: true }));
const file = join(folder, "raw.h5");
const readout = (head: HeadValues): RawReadout => ({ head, samples: Float32Array.of(1, 2) });

test.each([
  ["a head member that the standard lacks", [readout({ tempo: 1 })], 1, "no member head.tempo"],
  ["too many elements", [readout({ position: [1, 2, 3, 4] })], 1, "3 elements"],
  ["fewer readouts than announced", [readout({}), readout({})], 3, "2 readouts were given for 3"],
])(
  "%s is our own fault, not the disk's, and leaves nothing behind",
  async (_name, readouts, count, message) => {
    const failure = await writeRaw(file, "<x/>", count, readouts).catch((error: unknown) => error);
    expect(failure).toBeInstanceOf(Error);
    expect(failure).not.toBeInstanceOf(OutputError);
    expect(String(failure)).toContain(message);
    expect(readdirSync(folder)).toEqual([]);
  },
);

test("a fault of the source of readouts comes through unchanged", async () => {
  const fault = new RangeError("the source failed");
  function* failing(): Generator<RawReadout> {
    yield readout({});
    throw fault;
  }
  await expect(writeRaw(file, "<x/>", 2, failing())).rejects.toBe(fault);
  expect(readdirSync(folder)).toEqual([]);
});
