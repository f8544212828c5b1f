import fs from "node:fs";
import { InputError } from "../errors.js";

/** The NPY element types that are read and written; all little-endian, as the typed arrays of every supported host. */
export const NPY_DTYPES = ["<f4", "<f8", "<c8", "<c16", "|b1", "|u1", "<i4", "<i8"] as const;
export type NpyDtype = (typeof NPY_DTYPES)[number];

/** The typed array of each element type; complex numbers are interleaved real, imaginary. */
export interface NpyData {
  "<f4": Float32Array;
  "<f8": Float64Array;
  "<c8": Float32Array;
  "<c16": Float64Array;
  "|b1": Uint8Array;
  "|u1": Uint8Array;
  "<i4": Int32Array;
  "<i8": BigInt64Array;
}

/** An array as read from a file: C order, slowest axis first. */
export type NpyArray = {
  [D in NpyDtype]: { dtype: D; shape: number[]; fortranOrder: false; data: NpyData[D] };
}[NpyDtype];

/** Where arrays are written at byte positions; `OutputFile` of an output set is one. */
export interface ByteSink {
  write(bytes: NodeJS.ArrayBufferView, atBytes: number): void;
  writeSoon(bytes: NodeJS.ArrayBufferView, atBytes: number): Promise<void>;
}

const MAGIC = "\x93NUMPY";
/** NumPy keeps room for a first axis that grows to this many digits (numpy.lib.format, since NumPy 1.23). */
const GROWTH_AXIS_DIGITS = 21;
const ALIGN_BYTES = 64;

/** Bytes of one element. */
export function npyItemBytes(dtype: NpyDtype): number {
  return Number(dtype.slice(2));
}

/** Number of elements of an array of this shape; 1 for a scalar. */
export function elementCount(shape: readonly number[]): number {
  return shape.reduce((product, length) => product * length, 1);
}

/**
 * The NPY 1.0 header of a C-order array, byte for byte what numpy.save writes.
 * Source: the NumPy Enhancement Proposal "A Simple File Format for NumPy Arrays" (NEP 1).
 */
export function npyHeader(dtype: NpyDtype, shape: readonly number[]): Uint8Array {
  const tuple = shape.length === 1 ? `(${shape[0]},)` : `(${shape.join(", ")})`;
  const growth = shape.length > 0 ? GROWTH_AXIS_DIGITS - String(shape[0]).length : 0;
  const text = `{'descr': '${dtype}', 'fortran_order': False, 'shape': ${tuple}, }${" ".repeat(growth)}`;
  // 6 bytes of magic, 2 of version, 2 of length, the final newline. A full block is added where none is needed.
  const unpaddedBytes = 10 + text.length + 1;
  const padding = ALIGN_BYTES - (unpaddedBytes % ALIGN_BYTES);
  const lengthBytes = text.length + 1 + padding;
  if (lengthBytes > 0xffff) throw new RangeError(`an NPY 1.0 header cannot hold ${shape.length} axes`);
  const version = String.fromCharCode(1, 0, lengthBytes & 0xff, lengthBytes >> 8);
  return Buffer.from(`${MAGIC}${version}${text}${" ".repeat(padding)}\n`, "latin1");
}

/** A whole .npy file in memory, for small arrays. `data` is C order, complex numbers interleaved. */
export function npyBytes<D extends NpyDtype>(
  dtype: D,
  shape: readonly number[],
  data: NpyData[D],
): Uint8Array {
  const payloadBytes = elementCount(shape) * npyItemBytes(dtype);
  if (data.byteLength !== payloadBytes) {
    throw new RangeError(`shape [${shape}] of ${dtype} needs ${payloadBytes} bytes, have ${data.byteLength}`);
  }
  const header = npyHeader(dtype, shape);
  return Buffer.concat([header, new Uint8Array(data.buffer, data.byteOffset, data.byteLength)]);
}

/** A .npy file that is filled in pieces, in any order. What is never written stays zero if the sink is zero. */
export class NpyFile<D extends NpyDtype> {
  readonly dtype: D;
  readonly shape: readonly number[];
  /** Where the first element lies in the file. */
  readonly headerBytes: number;
  readonly #sink: ByteSink;

  /** Writes the header at once. */
  constructor(sink: ByteSink, dtype: D, shape: readonly number[]) {
    const header = npyHeader(dtype, shape);
    sink.write(header, 0);
    this.#sink = sink;
    this.dtype = dtype;
    this.shape = shape;
    this.headerBytes = header.length;
  }

  /**
   * Write `data` in the background so that its first element lies at `elementOffset` in C order. `data` must not
   * change before the promise settles.
   * @throws RangeError where the data would not fit the shape, or hold a part of an element
   */
  async writeAt(elementOffset: number, data: NpyData[D]): Promise<void> {
    await this.#sink.writeSoon(data, this.#byteOffset(elementOffset, data));
  }

  #byteOffset(elementOffset: number, data: NpyData[D]): number {
    const itemBytes = npyItemBytes(this.dtype);
    const elements = data.byteLength / itemBytes;
    const total = elementCount(this.shape);
    if (!Number.isInteger(elements) || elementOffset < 0 || elementOffset + elements > total) {
      throw new RangeError(`${elements} elements at ${elementOffset} do not fit [${this.shape}]`);
    }
    return this.headerBytes + elementOffset * itemBytes;
  }
}

/**
 * Read a C-order .npy file (versions 1.0 to 3.0) of one of `NPY_DTYPES`.
 * @throws InputError naming the file, what is wrong and how to mend it
 */
export function readNpy(file: string): NpyArray {
  let descriptor: number;
  try {
    descriptor = fs.openSync(file, "r");
  } catch (cause) {
    if (codeOf(cause) === "ENOENT")
      throw new InputError({ file }, "no such file", "Check the path", { cause });
    throw new InputError({ file }, `cannot be opened (${codeOf(cause)})`, "Check the file", { cause });
  }
  try {
    return readOpenNpy(file, descriptor);
  } catch (cause) {
    if (cause instanceof InputError || cause instanceof RangeError) throw cause;
    throw new InputError({ file }, `cannot be read (${codeOf(cause)})`, "Check the file.", { cause });
  } finally {
    fs.closeSync(descriptor);
  }
}

function readOpenNpy(file: string, descriptor: number): NpyArray {
  const fileBytes = fs.fstatSync(descriptor).size;
  const { text, startBytes } = readHeaderText(file, descriptor, fileBytes);
  const { dtype, shape } = parseHeader(file, text);
  const payloadBytes = elementCount(shape) * npyItemBytes(dtype);
  if (fileBytes - startBytes !== payloadBytes) {
    const rule = `shape [${shape}] of ${dtype} needs ${payloadBytes} bytes of data, have ${fileBytes - startBytes}`;
    throw new InputError(
      { file },
      rule,
      "Write the file again; it is cut short or holds more than one array.",
    );
  }
  const payload = new Uint8Array(payloadBytes);
  fill(descriptor, payload, startBytes);
  const data = typedArray(dtype, payload.buffer);
  // `data` is of the class that `typedArray` chose for this very dtype; the compiler cannot link the two.
  return { dtype, shape, fortranOrder: false, data } as NpyArray;
}

/** The header's dictionary, and where the elements start. */
function readHeaderText(file: string, descriptor: number, fileBytes: number) {
  const start = new Uint8Array(Math.min(12, fileBytes));
  fill(descriptor, start, 0);
  if (start.length < 10 || Buffer.from(start.buffer, 0, 6).toString("latin1") !== MAGIC) {
    throw new InputError({ file }, "is not a .npy file", "Save the array with numpy.save.");
  }
  const major = start[6] ?? 0;
  if (major < 1 || major > 3) {
    throw new InputError(
      { file, field: "version", value: major },
      "must be 1, 2 or 3",
      "Save it with numpy.save.",
    );
  }
  const view = new DataView(start.buffer);
  const prefixBytes = major === 1 ? 10 : 12;
  const headerBytes =
    start.length < prefixBytes ? 0 : major === 1 ? view.getUint16(8, true) : view.getUint32(8, true);
  const startBytes = prefixBytes + headerBytes;
  if (headerBytes === 0 || startBytes > fileBytes) {
    throw new InputError(
      { file },
      `the header needs ${startBytes} bytes, have ${fileBytes}`,
      "Write the file again.",
    );
  }
  const header = Buffer.alloc(headerBytes);
  fill(descriptor, header, prefixBytes);
  return { text: header.toString(major === 3 ? "utf8" : "latin1"), startBytes };
}

function parseHeader(file: string, text: string): { dtype: NpyDtype; shape: number[] } {
  const descr = /'descr'\s*:\s*'([^']*)'/.exec(text)?.[1];
  const order = /'fortran_order'\s*:\s*(True|False)/.exec(text)?.[1];
  const tuple = /'shape'\s*:\s*\(((?:\s*\d+\s*,?)*)\)/.exec(text)?.[1];
  const dtype = NPY_DTYPES.find((known) => known === descr);
  if (!dtype) {
    const rule = `must be one of ${NPY_DTYPES.join(" ")}`;
    const mend = "Convert it with array.astype, for example astype('<f4'), and save it again.";
    throw new InputError({ file, field: "element type", value: descr ?? "a record or unknown" }, rule, mend);
  }
  if (order === "True") {
    const mend = "Save numpy.ascontiguousarray(array) instead.";
    throw new InputError({ file, field: "axis order", value: "Fortran" }, "must be C order", mend);
  }
  if (order === undefined || tuple === undefined) {
    throw new InputError(
      { file },
      "the header lacks fortran_order or shape",
      "Save the array with numpy.save.",
    );
  }
  const shape = tuple
    .split(",")
    .map((part) => part.trim())
    .filter((part) => part !== "")
    .map(Number);
  const bytes = elementCount(shape) * npyItemBytes(dtype);
  if (!Number.isSafeInteger(bytes)) {
    throw new InputError({ file, field: "shape", value: shape }, "is too large", "Save a smaller array.");
  }
  return { dtype, shape };
}

function typedArray(dtype: NpyDtype, buffer: ArrayBuffer): NpyData[NpyDtype] {
  switch (dtype) {
    case "<f4":
    case "<c8":
      return new Float32Array(buffer);
    case "<f8":
    case "<c16":
      return new Float64Array(buffer);
    case "|b1":
    case "|u1":
      return new Uint8Array(buffer);
    case "<i4":
      return new Int32Array(buffer);
    case "<i8":
      return new BigInt64Array(buffer);
  }
}

/** Fill `target` from `atBytes` of the file; one read may give less than asked, and never more than 2 GiB. */
function fill(descriptor: number, target: Uint8Array, atBytes: number): void {
  const largest = 2 ** 30;
  for (let done = 0; done < target.length; ) {
    const wanted = Math.min(largest, target.length - done);
    const got = fs.readSync(descriptor, target, done, wanted, atBytes + done);
    if (got === 0) throw new Error("the file became shorter while it was read");
    done += got;
  }
}

/** The operating system's short code of an error, such as ENOENT. */
function codeOf(cause: unknown): string {
  const code = (cause as { code?: unknown } | undefined)?.code; // a system error carries `code`; others do not
  return typeof code === "string" ? code : String(cause);
}
