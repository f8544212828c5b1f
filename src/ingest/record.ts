import { InputError } from "../errors.js";
import type { CompoundMember, Metadata } from "./hdf5.js";

/** Classes of HDF5 types, as the library numbers them. */
const INTEGER = 0;
const FLOAT = 1;
const COMPOUND = 6;
const VLEN = 9;
const ARRAY = 10;

/** Counters of one readout, named as in the standard. */
export const COUNTERS = [
  "kspace_encode_step_1",
  "kspace_encode_step_2",
  "average",
  "slice",
  "contrast",
  "phase",
  "repetition",
  "set",
  "segment",
] as const;
export type Counter = (typeof COUNTERS)[number];

/** The head of one readout: the members that this program uses, under the standard's names with units added. */
export interface ReadoutHead {
  /** Position in the file's dataset, from 0. */
  readonly row: number;
  /** Flag n of the standard is bit n - 1. */
  readonly flags: bigint;
  readonly samples: number;
  readonly channels: number;
  readonly discardPre: number;
  readonly discardPost: number;
  readonly centerSample: number;
  readonly encodingSpace: number;
  readonly trajectoryDimensions: number;
  readonly dwellSeconds: number;
  readonly positionMm: readonly number[];
  readonly readDir: readonly number[];
  readonly phaseDir: readonly number[];
  readonly sliceDir: readonly number[];
  readonly counters: Readonly<Record<Counter, number>>;
}

type Getter = (view: DataView, at: number) => number;

/** Where the members of a record lie, taken from the file's type: members come in any order, size and byte order. */
export class RecordType {
  readonly #field: Record<string, Getter>;
  readonly #flags: (view: DataView, at: number) => bigint;
  readonly #vectors: Record<string, { read: Getter; bytes: number }>;
  readonly trajectory: PayloadType;
  readonly data: PayloadType;

  /** @throws InputError naming the member that is absent or of a type that the standard does not have. */
  constructor(file: string, path: string, metadata: Metadata) {
    const members = new Map(inMemoryOrder([...flatten(metadata.compound_type?.members ?? [], "", 0)]));
    const find = (name: string): CompoundMember => {
      const member = members.get(name);
      if (!member) throw new InputError({ file, field: `${path}: member ${name}` }, "is missing", STANDARD);
      return member;
    };
    const fail = (name: string, rule: string) =>
      new InputError({ file, field: `${path}: member ${name}` }, rule, STANDARD);
    this.#field = {};
    for (const name of SCALARS) {
      const getter = numberGetter(find(name));
      if (!getter) throw fail(name, "must be an integer or float");
      this.#field[name] = getter;
    }
    const flags = find("head.flags");
    if (flags.type !== INTEGER || flags.size !== 8) throw fail("head.flags", "must be a 64-bit integer");
    this.#flags = (view, at) => view.getBigUint64(at + flags.offset, flags.littleEndian);
    this.#vectors = {};
    for (const name of VECTORS) {
      const member = find(name);
      const element = member.array_type;
      const read = element && numberGetter({ ...member, ...element, offset: member.offset });
      if (member.type !== ARRAY || !read || element.total_size !== 3)
        throw fail(name, "must be an array of 3 floats");
      this.#vectors[name] = { read, bytes: element.size };
    }
    const payload = (name: string): PayloadType => {
      const member = find(name);
      const base = member.vlen_type;
      if (member.type !== VLEN || base?.type !== FLOAT || (base.size !== 4 && base.size !== 8))
        throw fail(name, "must be a variable-length list of 32- or 64-bit floats");
      return { offset: member.offset, bytes: base.size, littleEndian: base.littleEndian };
    };
    this.trajectory = payload("traj");
    this.data = payload("data");
  }

  head(view: DataView, at: number, row: number): ReadoutHead {
    const get = (name: string) => this.#field[`head.${name}`]!(view, at);
    const vector = (name: string) => {
      const { read, bytes } = this.#vectors[`head.${name}`]!;
      return [read(view, at), read(view, at + bytes), read(view, at + 2 * bytes)];
    };
    const counters = {} as Record<Counter, number>;
    for (const name of COUNTERS) counters[name] = get(`idx.${name}`);
    return {
      row,
      flags: this.#flags(view, at),
      samples: get("number_of_samples"),
      channels: get("active_channels"),
      discardPre: get("discard_pre"),
      discardPost: get("discard_post"),
      centerSample: get("center_sample"),
      encodingSpace: get("encoding_space_ref"),
      trajectoryDimensions: get("trajectory_dimensions"),
      dwellSeconds: get("sample_time_us") * 1e-6,
      positionMm: vector("position"),
      readDir: vector("read_dir"),
      phaseDir: vector("phase_dir"),
      sliceDir: vector("slice_dir"),
      counters,
    };
  }
}

/** A variable-length member: its place in the record, the size and byte order of its floats. */
export interface PayloadType {
  readonly offset: number;
  readonly bytes: 4 | 8;
  readonly littleEndian: boolean;
}

const STANDARD = "The record must be the standard's: head, traj and data (ISMRMRD, Inati 2017)";
const SCALARS = [
  "head.number_of_samples",
  "head.active_channels",
  "head.discard_pre",
  "head.discard_post",
  "head.center_sample",
  "head.encoding_space_ref",
  "head.trajectory_dimensions",
  "head.sample_time_us",
  ...COUNTERS.map((name) => `head.idx.${name}`),
];
const VECTORS = ["head.position", "head.read_dir", "head.phase_dir", "head.slice_dir"];

/** True where a dataset is a list of records that could be readouts. */
export function isReadoutRecord(metadata: Metadata | undefined): boolean {
  if (metadata?.type !== COMPOUND) return false;
  const names = metadata.compound_type?.members.map((member) => member.name) ?? [];
  return ["head", "traj", "data"].every((name) => names.includes(name));
}

function* flatten(
  members: CompoundMember[],
  prefix: string,
  offset: number,
): Generator<[string, CompoundMember]> {
  for (const member of members) {
    const placed = { ...member, offset: offset + member.offset };
    yield [prefix + member.name, placed];
    if (member.type === COMPOUND)
      yield* flatten(member.compound_type?.members ?? [], `${prefix}${member.name}.`, placed.offset);
  }
}

/**
 * The members with the byte order that the library's memory holds. It turns a record round whose members are all
 * big-endian, and hands out one of mixed order as it is in the file (h5wasm 0.10.3, measured).
 */
function inMemoryOrder(members: [string, CompoundMember][]): [string, CompoundMember][] {
  const orders = members
    .filter(([, member]) => member.type !== COMPOUND)
    .map(([, member]) => (member.array_type ?? member.vlen_type ?? member).littleEndian);
  if (orders.includes(true)) return members;
  const turned = <T extends Metadata | undefined>(type: T): T =>
    type ? { ...type, littleEndian: true } : type;
  return members.map(([name, member]) => {
    const parts = {
      ...(member.array_type && { array_type: turned(member.array_type) }),
      ...(member.vlen_type && { vlen_type: turned(member.vlen_type) }),
    };
    return [name, { ...member, littleEndian: true, ...parts }];
  });
}

function numberGetter(
  member: Pick<CompoundMember, "type" | "size" | "signed" | "offset" | "littleEndian">,
): Getter | undefined {
  const { offset, littleEndian: little } = member;
  const kind = `${member.type === FLOAT ? "f" : member.type === INTEGER ? (member.signed ? "i" : "u") : "?"}${member.size}`;
  const getters: Record<string, Getter> = {
    u1: (view, at) => view.getUint8(at + offset),
    i1: (view, at) => view.getInt8(at + offset),
    u2: (view, at) => view.getUint16(at + offset, little),
    i2: (view, at) => view.getInt16(at + offset, little),
    u4: (view, at) => view.getUint32(at + offset, little),
    i4: (view, at) => view.getInt32(at + offset, little),
    u8: (view, at) => Number(view.getBigUint64(at + offset, little)),
    i8: (view, at) => Number(view.getBigInt64(at + offset, little)),
    f4: (view, at) => view.getFloat32(at + offset, little),
    f8: (view, at) => view.getFloat64(at + offset, little),
  };
  return getters[kind];
}
