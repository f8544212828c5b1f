import { closeSync, existsSync, openSync, readSync, statSync } from "node:fs";
import type { CompoundMember, Metadata } from "h5wasm/node";
import { CarillonError, InputError } from "../errors.js";

type H5Module = Awaited<typeof import("h5wasm/node")["ready"]>;

let loading: Promise<H5Module> | undefined;

/**
 * Start loading the library; resolves when its compilation is under way, in threads of its own, so that the caller can
 * load other things meanwhile. What goes wrong is heard when a file is opened.
 */
export async function startHdf5(): Promise<void> {
  await import("h5wasm/node").catch(() => undefined);
  loadHdf5().catch(() => undefined);
}

/** The HDF5 C library (h5wasm), loaded once and only when a file is opened. Its errors become exceptions. */
export function loadHdf5(): Promise<H5Module> {
  loading ??= import("h5wasm/node").then(async (h5wasm) => {
    const module = await h5wasm.ready;
    (module as unknown as { activate_throwing_error_handler(): void }).activate_throwing_error_handler();
    return module;
  });
  return loading;
}

/** Raw rows of a dataset in the library's memory, valid only inside the callback of `withRows`. */
export interface Rows {
  readonly count: number;
  readonly rowBytes: number;
  /** The library's whole memory; `start` is the offset of the first row in it. */
  readonly heap: Uint8Array;
  readonly start: number;
}

/** One HDF5 file open for reading. Every fault of the library is an InputError that names the file. */
export class Hdf5File {
  readonly file: string;
  readonly #module: H5Module;
  readonly #id: bigint;
  #open = true;

  private constructor(file: string, module: H5Module, id: bigint) {
    this.file = file;
    this.#module = module;
    this.#id = id;
  }

  /** @throws InputError if the file is absent, empty, or not HDF5. */
  static async open(file: string): Promise<Hdf5File> {
    if (!existsSync(file)) throw new InputError({ file }, "no such file", "Check the path");
    const stat = statSync(file);
    if (!stat.isFile())
      throw new InputError({ file }, "not a regular file", "Give the path of a raw-data file");
    if (stat.size === 0) throw new InputError({ file }, "the file is empty", "Copy or export it again");
    const module = await loadHdf5();
    const id = guarded(file, undefined, "cannot be opened as HDF5", signatureHint(file), () =>
      module.open(file, module.H5F_ACC_RDONLY, false, module.H5F_LIBVER_EARLIEST, module.H5F_LIBVER_LATEST),
    );
    return new Hdf5File(file, module, id);
  }

  close(): void {
    if (!this.#open) return;
    this.#open = false;
    try {
      this.#module.close_file(this.#id);
    } catch {
      // A file that was only read loses nothing when closing it fails.
    }
  }

  /** Every object in the file, as absolute paths. */
  paths(): string[] {
    const names = this.#call(undefined, "the file's contents cannot be listed", () =>
      this.#module.get_names(this.#id, "/", true),
    );
    return names.map((name) => `/${name}`).sort();
  }

  /** Type and shape of a dataset, or undefined where `path` is not a dataset. */
  metadata(path: string): Metadata | undefined {
    try {
      return this.#module.get_dataset_metadata(this.#id, path);
    } catch {
      return undefined;
    }
  }

  /** Text of a scalar or one-element string dataset, of fixed or variable length. */
  text(path: string, metadata: Metadata): string {
    const { heap, bytes, pointer } = this.#read(path, null, null, metadata.total_size * metadata.size);
    try {
      if (!metadata.vlen) return decodeText(heap.subarray(pointer, pointer + bytes));
      const address = new DataView(heap.buffer, pointer, 4).getUint32(0, true);
      if (address === 0) return "";
      return decodeText(heap.subarray(address, heap.indexOf(0, address)));
    } finally {
      if (metadata.vlen) this.#reclaim(path, pointer, [1n]);
      this.#free(pointer);
    }
  }

  /**
   * Read rows [first, first + count) of a one-dimensional dataset (or of the long axis of [N, 1] and [1, N]) and
   * hand them to `use`; the variable-length parts are given back afterwards.
   */
  withRows<T>(path: string, metadata: Metadata, first: number, count: number, use: (rows: Rows) => T): T {
    const shape = metadata.shape ?? [];
    const long = shape.findIndex((length) => length > 1);
    const axis = Math.max(long, 0);
    const counts = shape.map((_, i) => BigInt(i === axis ? count : 1));
    const offsets = shape.map((_, i) => BigInt(i === axis ? first : 0));
    const { heap, pointer } = this.#read(path, counts, offsets, count * metadata.size, first);
    try {
      return use({ count, rowBytes: metadata.size, heap, start: pointer });
    } finally {
      this.#reclaim(path, pointer, counts);
      this.#free(pointer);
    }
  }

  #read(path: string, counts: bigint[] | null, offsets: bigint[] | null, bytes: number, first = 0) {
    const malloc = (this.#module as unknown as { _malloc(bytes: number): number })._malloc;
    const pointer = malloc(bytes);
    // Variable-length pointers of a read that fails half-way must not hold what was in the memory before.
    this.#module.HEAPU8.fill(0, pointer, pointer + bytes);
    try {
      const strides = counts?.map(() => 1n) ?? null;
      this.#call(`${path}, from row ${first}`, "cannot be read", () =>
        this.#module.get_dataset_data(this.#id, path, counts, offsets, strides, BigInt(pointer)),
      );
    } catch (error) {
      this.#free(pointer);
      throw error;
    }
    return { heap: this.#module.HEAPU8, bytes, pointer };
  }

  #reclaim(path: string, pointer: number, counts: bigint[]): void {
    this.#call(path, "its memory cannot be given back", () =>
      this.#module.reclaim_vlen_memory_count(this.#id, path, "", BigInt(pointer), counts),
    );
  }

  #free(pointer: number): void {
    (this.#module as unknown as { _free(pointer: number): void })._free(pointer);
  }

  #call<T>(field: string | undefined, rule: string, call: () => T): T {
    return guarded(this.file, field, rule, "The file may be damaged: copy or export it again", call);
  }
}

/** Run a call into the library; what it throws (an Error, a number, a page of source) becomes one line. */
function guarded<T>(file: string, field: string | undefined, rule: string, mend: string, call: () => T): T {
  try {
    return call();
  } catch (error) {
    if (error instanceof CarillonError) throw error;
    throw new InputError({ file, field }, `${rule}: ${diagnosis(error)}`, mend, { cause: error });
  }
}

/** The innermost line of an HDF5 error stack, which says what went wrong. */
function diagnosis(error: unknown): string {
  const text = error instanceof Error ? error.message : String(error);
  const [, there, wanted] = /truncated file: eof = (\d+),.*stored_eof = (\d+)/.exec(text) ?? [];
  if (there) return `only ${there} of its ${wanted} bytes are there`;
  const frames = [...text.matchAll(/#\d+: .*? in \w+\(\): (.*)/g)].map((match) => match[1]?.trim());
  return frames.at(-1)?.slice(0, 160) ?? text.split("\n", 1)[0]?.slice(0, 160) ?? "unknown fault";
}

function signatureHint(file: string): string {
  const head = Buffer.alloc(8);
  const descriptor = openSync(file, "r");
  readSync(descriptor, head, 0, 8, 0);
  closeSync(descriptor);
  const signature = head[0] === 0x89 && head.toString("latin1", 1, 4) === "HDF";
  return signature
    ? "The file is cut short or damaged: copy or export it again"
    : "Give a raw-data file in the ISMRMRD standard (HDF5)";
}

function decodeText(bytes: Uint8Array): string {
  const end = bytes.indexOf(0);
  return new TextDecoder("utf-8").decode(new Uint8Array(end < 0 ? bytes : bytes.subarray(0, end)));
}

export type { CompoundMember, Metadata };
