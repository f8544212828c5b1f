import { spawnSync } from "node:child_process";
import fs from "node:fs";
import os from "node:os";
import path from "node:path";
import { afterAll, describe, expect, test } from "vitest";
import { InputError } from "../../src/errors.js";
import {
  elementCount,
  type NpyData,
  type NpyDtype,
  NpyFile,
  npyBytes,
  npyHeader,
  readNpy,
} from "../../src/writers/npy.js";
import fixture from "./fixtures/npy.json" with { type: "json" };

const folder = fs.mkdtempSync(path.join(os.tmpdir(), "npy-"));
afterAll(() => fs.rmSync(folder, { recursive: true }));

/** The elements of fixtures/make_npy.py: i/4 - 1, imaginary i/8; i % 3 == 0; i; 1000 i - 7. */
function ramp(dtype: NpyDtype, count: number): NpyData[NpyDtype] {
  const i = Array.from({ length: count }, (_, k) => k);
  const complex = i.flatMap((k) => [k / 4 - 1, k / 8]);
  switch (dtype) {
    case "<f4":
      return Float32Array.from(i, (k) => k / 4 - 1);
    case "<f8":
      return Float64Array.from(i, (k) => k / 4 - 1);
    case "<c8":
      return Float32Array.from(complex);
    case "<c16":
      return Float64Array.from(complex);
    case "|b1":
      return Uint8Array.from(i, (k) => Number(k % 3 === 0));
    case "|u1":
      return Uint8Array.from(i);
    case "<i4":
      return Int32Array.from(i, (k) => k * 1000 - 7);
    case "<i8":
      return BigInt64Array.from(i, (k) => BigInt(k * 1000 - 7));
  }
}

const cases = fixture.arrays.map((entry) => ({ ...entry, dtype: entry.dtype as NpyDtype }));

/** Save bytes and give the file's name. */
function saved(name: string, bytes: Uint8Array): string {
  const file = path.join(folder, name);
  fs.writeFileSync(file, bytes);
  return file;
}

function refusal(file: string): InputError {
  try {
    readNpy(file);
  } catch (fault) {
    if (fault instanceof InputError) return fault;
    throw fault;
  }
  throw new Error(`${file} was read`);
}

describe.each(cases)("$dtype $shape as saved by numpy.save", ({ dtype, shape, base64 }) => {
  const bytes = Buffer.from(base64, "base64");

  test("is written byte for byte", () => {
    const ours = Buffer.from(npyBytes(dtype, shape, ramp(dtype, elementCount(shape))));
    expect(ours.toString("latin1")).toBe(bytes.toString("latin1"));
  });

  test("is read", () => {
    const array = readNpy(saved("numpy.npy", bytes));
    expect(array).toEqual({ dtype, shape, fortranOrder: false, data: ramp(dtype, elementCount(shape)) });
  });
});

const PYTHON = "/usr/bin/python3";
/** Without NumPy the committed fixture above is the check. */
const hasNumpy = spawnSync(PYTHON, ["-c", "import numpy"]).status === 0;

test.skipIf(!hasNumpy)(
  "headers equal NumPy's for 40 lengths, also where a full block of padding is added",
  () => {
    const shapes = Array.from({ length: 40 }, (_, axes) =>
      Array.from({ length: axes }, (_, i) => 10 ** (i % 4)),
    );
    const script = `import io, json, sys
from numpy.lib import format
for shape in json.load(sys.stdin):
    out = io.BytesIO()
    format.write_array_header_1_0(out, {"descr": "<c8", "fortran_order": False, "shape": tuple(shape)})
    print(out.getvalue().hex())`;
    const numpy = spawnSync(PYTHON, ["-c", script], { input: JSON.stringify(shapes), encoding: "utf8" });
    const ours = shapes.map((shape) => Buffer.from(npyHeader("<c8", shape)).toString("hex"));
    expect(ours).toEqual(numpy.stdout.trim().split("\n"));
  },
);

test("a file filled by offsets equals one written whole, from views with a byte offset", async () => {
  const shape = [3, 4, 5];
  const data = ramp("<c8", 60) as Float32Array;
  const bytes = Buffer.alloc(npyBytes("<c8", shape, data).length);
  const write = (part: NodeJS.ArrayBufferView, at: number) =>
    void Buffer.from(part.buffer, part.byteOffset, part.byteLength).copy(bytes, at);
  const sink = { write, writeSoon: async (part: NodeJS.ArrayBufferView, at: number) => write(part, at) };
  const file = new NpyFile(sink, "<c8", shape);
  for (const slab of [2, 0, 1]) await file.writeAt(slab * 20, data.subarray(slab * 40, slab * 40 + 40));
  expect(bytes.equals(npyBytes("<c8", shape, data))).toBe(true);
});

test.each([
  ["past the end", 59, 4],
  ["half a complex number", 0, 3],
  ["before the start", -1, 2],
])("writing %s is refused", async (_, offset, floats) => {
  const file = new NpyFile({ write: () => {}, writeSoon: async () => {} }, "<c8", [3, 4, 5]);
  await expect(file.writeAt(offset, new Float32Array(floats))).rejects.toThrow(RangeError);
});

test("data that does not fill the shape is refused", () => {
  expect(() => npyBytes("<f4", [3, 4], new Float32Array(11))).toThrow("needs 48 bytes, have 44");
});

describe("what is not read says so, with the file and a mend", () => {
  test.each([
    ["fortran", fixture.fortran, /axis order is Fortran; must be C order\. Save numpy\.ascontiguousarray/],
    ["bigEndian", fixture.bigEndian, /element type is >f4; must be one of <f4 .*astype/],
    ["record", fixture.record, /element type is a record or unknown/],
  ])("%s", (name, base64, text) => {
    const fault = refusal(saved(`${name}.npy`, Buffer.from(base64, "base64")));
    expect(fault.message).toMatch(text);
    expect(fault.message).toContain(`${name}.npy`);
    expect(fault.exitCode).toBe(3);
  });

  const good = Buffer.from(cases[0]?.base64 ?? "", "base64");
  test.each([
    ["one byte short", good.subarray(0, -1), /needs 240 bytes of data, have 239/],
    ["one byte long", Buffer.concat([good, Buffer.alloc(1)]), /needs 240 bytes of data, have 241/],
    ["cut in the header", good.subarray(0, 50), /the header needs 128 bytes, have 50/],
    ["cut in the magic", good.subarray(0, 4), /is not a \.npy file/],
    ["empty", Buffer.alloc(0), /is not a \.npy file/],
    ["of version 9", Buffer.from(good).fill(9, 6, 7), /version is 9; must be 1, 2 or 3/],
  ])("%s", (_, bytes, text) => {
    expect(refusal(saved("broken.npy", bytes)).message).toMatch(text);
  });

  test("a shape beyond any memory", () => {
    const text = good
      .toString("latin1")
      .replace("(3, 4, 5)", "(3, 4, 99999999999999999)")
      .replace(/ {14}\n/, "\n");
    const fault = refusal(saved("huge.npy", Buffer.from(text, "latin1")));
    expect(fault.message).toMatch(/shape is .*; is too large/);
  });

  test("a missing file, and a folder", () => {
    expect(refusal(path.join(folder, "none.npy")).message).toMatch(
      /none\.npy: no such file\. Check the path/,
    );
    expect(refusal(folder).exitCode).toBe(3);
  });
});

test("version 2.0, which numpy.save uses for very long headers, is read", () => {
  const one = npyBytes("<i4", [2], Int32Array.of(5, -6));
  const text = Buffer.from(one.subarray(10, 128));
  const prefix = Buffer.from("\x93NUMPY\x02\x00\0\0\0\0", "latin1");
  prefix.writeUInt32LE(text.length, 8);
  const file = saved("two.npy", Buffer.concat([prefix, text, one.subarray(128)]));
  expect(readNpy(file).data).toEqual(Int32Array.of(5, -6));
});
