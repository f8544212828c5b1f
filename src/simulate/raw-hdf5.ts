import type { CompoundMember } from "h5wasm/node";
import { loadHdf5 } from "../ingest/hdf5.js";
import type { RawReadout } from "./raw-writer.js";

const XML = "/dataset/xml";
const DATA = "/dataset/data";

/** Values of the members of a record's head, by the standard's names; an array for a member of several elements. */
export type HeadValues = Readonly<Record<string, number | bigint | readonly (number | bigint)[]>>;

type H5Module = Awaited<ReturnType<typeof loadHdf5>>;
/** The parts of the C runtime that the library's types leave out. */
type Heap = H5Module & { _malloc(bytes: number): number; _free(pointer: number): void };

interface Member {
  readonly offset: number;
  readonly bytes: number;
  readonly elements: number;
  readonly float: boolean;
}

/**
 * A raw-data file that already holds the record type, open for filling.
 *
 * Records are laid out by hand in the library's memory, by the offsets that the file's own type states; a
 * variable-length member is {u32 length, u32 pointer} there.
 */
export class RawHdf5 {
  readonly #module: Heap;
  readonly #id: bigint;
  readonly #recordBytes: number;
  readonly #members: ReadonlyMap<string, Member>;

  private constructor(module: Heap, id: bigint) {
    this.#module = module;
    this.#id = id;
    const type = module.get_dataset_metadata(id, DATA);
    this.#recordBytes = type.size;
    this.#members = new Map(flatten(type.compound_type?.members ?? [], "", 0));
  }

  static async open(file: string): Promise<RawHdf5> {
    const module = (await loadHdf5()) as Heap; // emscripten's runtime always has malloc and free
    const { H5F_ACC_RDWR, H5F_LIBVER_EARLIEST, H5F_LIBVER_LATEST } = module;
    return new RawHdf5(
      module,
      module.open(file, H5F_ACC_RDWR, false, H5F_LIBVER_EARLIEST, H5F_LIBVER_LATEST),
    );
  }

  /** Write the header text; ASCII, as the standard's library wants it. */
  writeHeader(xml: string): void {
    const text = Buffer.from(`${xml}\0`, "latin1");
    this.#withMemory(4 + text.length, (pointer, view) => {
      view.setUint32(0, pointer + 4, true);
      new Uint8Array(view.buffer, view.byteOffset + 4, text.length).set(text);
      this.#write(XML, 0, 1, pointer);
    });
  }

  resize(records: number): void {
    checked(() => this.#module.resize_dataset(this.#id, DATA, [BigInt(records)]));
  }

  /** Write readouts as the records from `first` on. */
  writeReadouts(first: number, readouts: readonly RawReadout[]): void {
    if (readouts.length === 0) return;
    const tableBytes = readouts.length * this.#recordBytes;
    const bytes = readouts.reduce((sum, { samples }) => sum + samples.byteLength, tableBytes);
    this.#withMemory(bytes, (pointer, view) => {
      const data = this.#member("data").offset;
      let payload = tableBytes;
      for (const [i, { head, samples }] of readouts.entries()) {
        const record = i * this.#recordBytes;
        for (const [name, value] of Object.entries(head)) this.#set(view, record, `head.${name}`, value);
        view.setUint32(record + data, samples.length, true);
        view.setUint32(record + data + 4, pointer + payload, true);
        new Float32Array(view.buffer, pointer + payload, samples.length).set(samples);
        payload += samples.byteLength;
      }
      this.#write(DATA, first, readouts.length, pointer);
    });
  }

  close(): void {
    checked(() => this.#module.close_file(this.#id));
  }

  /** Close without caring for what is lost. */
  abandon(): void {
    try {
      this.#module.close_file(this.#id);
    } catch {
      // The file is deleted next, and the fault that led here is the one to report.
    }
  }

  #member(name: string): Member {
    const member = this.#members.get(name);
    if (!member) throw new Error(`the record has no member ${name}`);
    return member;
  }

  #set(view: DataView, record: number, name: string, value: HeadValues[string]): void {
    const { offset, bytes, elements, float } = this.#member(name);
    const values = typeof value === "object" ? value : [value];
    if (values.length > elements) throw new Error(`${name} has ${elements} elements, not ${values.length}`);
    for (const [i, element] of values.entries()) {
      const at = record + offset + i * bytes;
      if (float) view.setFloat32(at, Number(element), true);
      else if (bytes === 8) view.setBigUint64(at, BigInt(element), true);
      else if (bytes === 4) view.setUint32(at, Number(element), true);
      else view.setUint16(at, Number(element), true);
    }
  }

  /** Zeroed memory of the library; the view is valid until the library's memory grows, which writing may cause. */
  #withMemory(bytes: number, use: (pointer: number, view: DataView) => void): void {
    const pointer = this.#module._malloc(bytes);
    if (pointer === 0) throw new Error(`no memory for ${bytes} bytes`);
    try {
      const heap = this.#module.HEAPU8;
      heap.fill(0, pointer, pointer + bytes);
      use(pointer, new DataView(heap.buffer, pointer, bytes));
    } finally {
      this.#module._free(pointer);
    }
  }

  #write(path: string, first: number, count: number, pointer: number): void {
    checked(() =>
      this.#module.set_dataset_data(this.#id, path, [BigInt(count)], [BigInt(first)], [1n], BigInt(pointer)),
    );
  }
}

/** What the HDF5 library could not do with the file. */
export class Hdf5Fault extends Error {
  override readonly name = "Hdf5Fault";
}

/** Run a call into the library; what it throws, and a negative status or handle, become an Hdf5Fault of one line. */
function checked<T extends number | bigint>(call: () => T): T {
  let status: T;
  try {
    status = call();
  } catch (cause) {
    const text = cause instanceof Error ? cause.message : String(cause);
    throw new Hdf5Fault(diagnosis(text), { cause });
  }
  if (status < 0) throw new Hdf5Fault(`the HDF5 library gave the status ${status}`);
  return status;
}

/** One line of an HDF5 error stack: the system's words where it refused, else the innermost frame, which is the last. */
function diagnosis(text: string): string {
  const refused = /error message = '([^']+)'/.exec(text)?.[1];
  const innermost = [...text.matchAll(/#\d+: .*? in \w+\(\): (.*)/g)].at(-1)?.[1];
  return (refused ?? innermost ?? text.split("\n", 1)[0] ?? "").trim().slice(0, 160);
}

/** The members of the record and of its inner records, by dotted name, with offsets from the record's start. */
function* flatten(members: CompoundMember[], prefix: string, start: number): Generator<[string, Member]> {
  for (const member of members) {
    const name = prefix + member.name;
    const offset = start + member.offset;
    const element = member.array_type ?? member;
    yield [
      name,
      {
        offset,
        bytes: element.size,
        elements: member.array_type?.total_size ?? 1,
        float: element.type === FLOAT,
      },
    ];
    yield* flatten(member.compound_type?.members ?? [], `${name}.`, offset);
  }
}

/** Class of floating-point types, as the library numbers them. */
const FLOAT = 1;
