import fs from "node:fs";
import path from "node:path";
import process from "node:process";
import { OutputError, UsageError } from "../errors.js";
import { makeFolder, removeFolders } from "./folder.js";
import { elementCount, type NpyDtype, NpyFile, npyItemBytes } from "./npy.js";
import { hashFile, OutputFile, type OutputRecord, sha256, writing } from "./output-file.js";

export interface OutputSetOptions {
  /** Target folder; made with its parents where it is missing. */
  readonly folder: string;
  /** Names of all outputs but the sidecar, without folders. */
  readonly names: readonly string[];
  /** The file that is renamed last: where it exists, the set is whole. */
  readonly sidecar?: string;
  /** Replace files that exist. */
  readonly force?: boolean;
  /** Computes the hashes. Default: this thread. */
  readonly hasher?: typeof hashFile;
}

/** Temporary files that a set of this process holds now: one with our process id but not here is a leftover. */
const held = new Set<string>();

/**
 * Files that appear together or not at all. They are written as `.carillon-<name>.<pid>.tmp` in the target folder
 * and renamed at `commit`, the sidecar last. Use: create and write; `await seal()` for the hashes; `commit(sidecar)`;
 * and `abort()` in a `finally` and in signal handlers: it is synchronous and does nothing after a commit.
 *
 * @throws UsageError where a file exists and `force` is not set; OutputError where a file cannot be written
 */
export class OutputSet {
  readonly folder: string;
  readonly #names: readonly string[];
  readonly #sidecar: string | undefined;
  readonly #force: boolean;
  readonly #files = new Map<string, OutputFile>();
  readonly #payloadStarts = new Map<string, number>();
  readonly #records = new Map<string, OutputRecord>();
  readonly #sealing = new Map<string, Promise<void>>();
  readonly #hasher: typeof hashFile;
  /** Folders that this set made, deepest first. */
  readonly #madeFolders: readonly string[];
  #over = false;

  /** Checks everything that can be checked, then makes the folder and removes leftovers. Writes no file. */
  constructor(options: OutputSetOptions) {
    this.folder = path.resolve(options.folder);
    this.#names = options.names;
    this.#sidecar = options.sidecar;
    this.#force = options.force ?? false;
    this.#hasher = options.hasher ?? hashFile;
    const all = this.#allNames();
    for (const name of all) {
      if (name !== path.basename(name) || name === "") throw new Error(`${name} is not a plain file name`);
    }
    if (new Set(all).size < all.length) throw new Error(`an output name occurs twice: ${all.join(" ")}`);
    this.#refuseExisting();
    this.#madeFolders = writing(this.folder, () => makeFolder(this.folder));
    removeLeftovers(this.folder, all);
  }

  /** An array file that is filled by offsets; elements that are never written are zero. */
  createNpy<D extends NpyDtype>(name: string, dtype: D, shape: readonly number[]): NpyFile<D> {
    const file = this.#create(name);
    const npy = new NpyFile(file, dtype, shape);
    file.extendTo(npy.headerBytes + elementCount(shape) * npyItemBytes(dtype));
    this.#payloadStarts.set(name, npy.headerBytes);
    return npy;
  }

  /** Write a whole file. `payload` is what `payloadSha256` is taken of, such as a picture's pixels. */
  write(name: string, bytes: Uint8Array | string, payload?: NodeJS.ArrayBufferView): void {
    const data = typeof bytes === "string" ? Buffer.from(bytes, "utf8") : bytes;
    const file = this.#create(name);
    file.write(data, 0);
    file.close();
    const payloadHash = payload ? { payloadSha256: sha256(payload) } : {};
    this.#records.set(name, { name, bytes: data.byteLength, sha256: sha256(data), ...payloadHash });
  }

  /** Close all outputs and hash what was not hashed yet. Resolves to their records, in the order of `names`. */
  async seal(): Promise<OutputRecord[]> {
    await Promise.all([...this.#files.keys()].map((name) => this.sealOne(name)));
    return this.#names.map((name) => {
      const record = this.#records.get(name);
      if (!record) throw new Error(`output ${name} was never written`);
      return record;
    });
  }

  /** Close one output and hash it, in the background; nothing more can be written to it. */
  async sealOne(name: string): Promise<void> {
    if (this.#records.has(name)) return;
    const sealing = this.#sealing.get(name) ?? this.#hash(name);
    this.#sealing.set(name, sealing);
    await sealing;
  }

  async #hash(name: string): Promise<void> {
    const file = this.#files.get(name);
    if (!file) throw new Error(`output ${name} was never written`);
    file.close();
    const hashes = await this.#hasher(file.temporaryPath, this.#payloadStarts.get(name)).catch((fault) => {
      if (!this.#over) throw fault; // else the abort took the file away
    });
    if (!hashes || this.#over) throw new Error("the output set was aborted while it was sealed");
    const { payloadSha256, ...whole } = hashes;
    this.#records.set(name, { name, ...whole, ...(payloadSha256 ? { payloadSha256 } : {}) });
  }

  /**
   * Rename all files to their names, the sidecar last. With `force` an old sidecar is removed first, so that a
   * sidecar never stands beside a mixture of old and new files. Synchronous: no signal handler sees it half done.
   */
  commit(sidecar?: Uint8Array | string): void {
    if (this.#over) throw new Error("the output set is over already");
    if ((sidecar === undefined) !== (this.#sidecar === undefined))
      throw new Error("sidecar name and text go together");
    if (this.#sidecar !== undefined && sidecar !== undefined) this.write(this.#sidecar, sidecar);
    for (const name of this.#allNames()) {
      if (!this.#records.has(name)) throw new Error(`output ${name} was never sealed`);
    }
    this.#refuseExisting(); // another run may have finished meanwhile
    const renamed: string[] = [];
    try {
      if (this.#sidecar !== undefined) removeFile(this.#final(this.#sidecar));
      for (const [name, file] of this.#inOrder()) {
        writing(this.#final(name), () => fs.renameSync(file.temporaryPath, this.#final(name)));
        held.delete(file.temporaryPath);
        renamed.push(this.#final(name));
      }
    } catch (fault) {
      for (const file of renamed) fs.rmSync(file, { force: true }); // a part of a set is worse than none
      throw fault;
    }
    this.#over = true;
  }

  /** Remove every temporary file, and the folders that this set made if they are empty. Never throws. */
  abort(): void {
    if (this.#over) return;
    this.#over = true;
    for (const file of this.#files.values()) {
      quietly(() => file.close());
      quietly(() => fs.rmSync(file.temporaryPath, { force: true }));
      held.delete(file.temporaryPath);
    }
    removeFolders(this.#madeFolders);
  }

  #create(name: string): OutputFile {
    if (this.#over) throw new Error("the output set is over already");
    if (!this.#allNames().includes(name)) throw new Error(`output ${name} was not announced`);
    const temporary = path.join(this.folder, `.carillon-${name}.${process.pid}.tmp`);
    const file = new OutputFile(temporary, this.#final(name));
    held.add(temporary);
    this.#files.set(name, file);
    return file;
  }

  /** Files in the order of `names`, whatever the order of their making; the sidecar last. */
  #inOrder(): [string, OutputFile][] {
    return this.#allNames().flatMap((name) => {
      const file = this.#files.get(name);
      return file ? [[name, file] as [string, OutputFile]] : [];
    });
  }

  #refuseExisting(): void {
    for (const name of this.#allNames()) {
      const file = this.#final(name);
      // lstat: a link that leads nowhere is a file that a rename would destroy
      const found = writing(file, () => lstatIfAny(file));
      if (!found) continue;
      if (found.isDirectory()) throw new OutputError({ file }, "is a folder", "Choose another output name.");
      if (!this.#force) throw new UsageError({ file }, "exists already", "Add --force to replace it.");
    }
  }

  #allNames(): string[] {
    return this.#sidecar === undefined ? [...this.#names] : [...this.#names, this.#sidecar];
  }

  #final(name: string): string {
    return path.join(this.folder, name);
  }
}

/**
 * Remove what killed runs left of these very outputs. Those of other outputs stay: on a folder that several
 * computers share, a process of another computer looks dead from here.
 */
function removeLeftovers(folder: string, names: readonly string[]): void {
  for (const entry of writing(folder, () => fs.readdirSync(folder))) {
    const match = /^\.carillon-(.+)\.(\d+)\.tmp$/.exec(entry);
    if (!match?.[1] || !match[2] || !names.includes(match[1])) continue;
    const file = path.join(folder, entry);
    const pid = Number(match[2]);
    const alive = pid === process.pid ? held.has(file) : isAlive(pid);
    if (!alive) removeFile(file);
  }
}

function isAlive(pid: number): boolean {
  try {
    process.kill(pid, 0); // signal 0 only asks
    return true;
  } catch (cause) {
    return (cause as { code?: unknown }).code !== "ESRCH"; // EPERM: alive, and somebody else's
  }
}

function lstatIfAny(file: string): fs.Stats | undefined {
  return fs.lstatSync(file, { throwIfNoEntry: false });
}

function removeFile(file: string): void {
  writing(file, () => fs.rmSync(file, { force: true }));
}

function quietly(operation: () => void): void {
  try {
    operation();
  } catch {
    // Cleaning up goes on: the fault that led here is the one to report.
  }
}
