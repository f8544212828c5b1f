import { InputError } from "../errors.js";
import { type CompoundMember, Hdf5File, type Metadata, type Rows } from "./hdf5.js";
import { parseHeader, type RawHeader } from "./header.js";
import { isReadoutRecord, type PayloadType, type ReadoutHead, RecordType } from "./record.js";

export type { CompoundMember };

/** Rows that are read at a time; the memory in use is this many readouts. */
export const DEFAULT_BLOCK_ROWS = 64;

/** Readouts of one block: heads decoded, payloads still in the library's memory. Valid until the next block. */
export interface ReadoutBlock {
  readonly heads: readonly ReadoutHead[];
  /** Floats in the payload of readout i: 2 x channels x samples. */
  payloadFloats(i: number): number;
  /**
   * The samples of readout i as float32, interleaved complex, channel by channel: a view of the library's memory
   * where the file already holds that (read it before the block ends), else a converted copy.
   */
  samples(i: number): Float32Array;
  /** Coordinates of readout i in the units of the file, [sample, dimension]. */
  trajectory(i: number): Float32Array;
}

/** A raw group of an open file: its header, and its readouts in the order of the file. */
export class RawFile {
  readonly header: RawHeader;
  readonly #hdf5: Hdf5File;
  readonly #path: string;
  readonly #metadata: Metadata;
  readonly #record: RecordType;

  private constructor(
    readonly file: string,
    readonly group: string,
    readonly readouts: number,
    parts: { header: RawHeader; hdf5: Hdf5File; path: string; metadata: Metadata },
  ) {
    this.header = parts.header;
    this.#hdf5 = parts.hdf5;
    this.#path = parts.path;
    this.#metadata = parts.metadata;
    this.#record = new RecordType(file, parts.path, parts.metadata);
  }

  /**
   * Open a file and find its raw group: one that holds a header (`xml`) and a dataset (`data`) of head, traj and data.
   * @throws InputError if there is none, several and no `group`, no readouts, or the header is broken.
   */
  static async open(file: string, group?: string): Promise<RawFile> {
    const hdf5 = await Hdf5File.open(file);
    try {
      const path = chooseGroup(hdf5, group);
      const metadata = hdf5.metadata(`${path}/data`)!;
      const count = (metadata.shape ?? []).reduce((product, length) => product * length, 1);
      const long = (metadata.shape ?? []).filter((length) => length > 1).length;
      if (long > 1)
        throw new InputError(
          { file, field: `${path}/data` },
          "must be one list of readouts",
          "Export the file again",
        );
      if (count === 0)
        throw new InputError({ file, field: `${path}/data` }, "holds no readouts", "Export the file again");
      const header = parseHeader(readHeaderText(hdf5, path), file);
      return new RawFile(file, path.slice(1), count, { header, hdf5, path: `${path}/data`, metadata });
    } catch (error) {
      hdf5.close();
      throw error;
    }
  }

  close(): void {
    this.#hdf5.close();
  }

  /** Hand each block of readouts in turn to `use`; the block's samples are valid only inside it. */
  readBlock<T>(first: number, count: number, use: (block: ReadoutBlock) => T): T {
    return this.#hdf5.withRows(this.#path, this.#metadata, first, count, (rows) =>
      use(this.#block(rows, first)),
    );
  }

  #block(rows: Rows, first: number): ReadoutBlock {
    const view = new DataView(rows.heap.buffer, rows.heap.byteOffset);
    const at = (i: number) => rows.start + i * rows.rowBytes;
    const heads: ReadoutHead[] = [];
    for (let i = 0; i < rows.count; i++) heads.push(this.#record.head(view, at(i), first + i));
    const { data, trajectory } = this.#record;
    const views: (Float32Array | undefined)[] = []; // asked for several times
    return {
      heads,
      payloadFloats: (i) => view.getUint32(at(i) + data.offset, true),
      samples: (i) => {
        const known = views[i] ?? floats(view, at(i), data);
        views[i] = known;
        return known;
      },
      trajectory: (i) => floats(view, at(i), trajectory),
    };
  }
}

/** The floats of a variable-length member {u32 length, u32 address}; converted only where they are not float32 in this byte order. */
function floats(view: DataView, at: number, type: PayloadType): Float32Array {
  const length = view.getUint32(at + type.offset, true);
  const address = view.getUint32(at + type.offset + 4, true);
  if (type.bytes === 4 && type.littleEndian) return new Float32Array(view.buffer, address, length);
  const converted = new Float32Array(length);
  for (let i = 0; i < length; i++)
    converted[i] =
      type.bytes === 4
        ? view.getFloat32(address + 4 * i, type.littleEndian)
        : view.getFloat64(address + 8 * i, type.littleEndian);
  return converted;
}

function chooseGroup(hdf5: Hdf5File, wanted: string | undefined): string {
  const { file } = hdf5;
  const paths = hdf5.paths();
  const groups = paths
    .filter((path) => path.endsWith("/data") && isReadoutRecord(hdf5.metadata(path)))
    .map((path) => path.slice(0, -"/data".length))
    .filter((path) => paths.includes(`${path}/xml`));
  const names = groups.map((path) => path.slice(1)).join(", ");
  if (wanted !== undefined) {
    const path = `/${wanted.replace(/^\/|\/$/g, "")}`;
    if (groups.includes(path)) return path;
    throw new InputError(
      { file, field: "group", value: wanted },
      "not a raw group of this file",
      names ? `Choose one of: ${names}` : "The file has none",
    );
  }
  if (groups.length === 1) return groups[0]!;
  if (groups.length > 1)
    throw new InputError({ file }, `holds several raw groups: ${names}`, "Choose one with --group NAME");
  throw new InputError({ file }, noGroupRule(hdf5, paths), "Give a raw-data file in the ISMRMRD standard");
}

/** Why there is no raw group: the nearest miss is named. */
function noGroupRule(hdf5: Hdf5File, paths: string[]): string {
  const base = "holds no raw group (a header `xml` beside a dataset `data` of head, traj and data)";
  const records = paths.find((path) => isReadoutRecord(hdf5.metadata(path)));
  if (records) return `${base}: ${records} has no header beside it`;
  const headers = paths.find((path) => path.endsWith("/xml"));
  if (!headers) return base;
  const beside = headers.replace(/xml$/, "data");
  return paths.includes(beside)
    ? `${base}: ${beside} is something else, or damaged`
    : `${base}: beside ${headers} there are no readouts`;
}

function readHeaderText(hdf5: Hdf5File, path: string): string {
  const { file } = hdf5;
  const metadata = hdf5.metadata(`${path}/xml`);
  const STRING = 3;
  if (metadata?.type !== STRING || metadata.total_size < 1)
    throw new InputError(
      { file, field: `${path}/xml` },
      "must be the header's text",
      "Export the file again",
    );
  return hdf5.text(`${path}/xml`, metadata);
}
