import { createHash } from "node:crypto";
import fs from "node:fs";
import { OutputError } from "../errors.js";
import type { ByteSink } from "./npy.js";

/** What is known of a finished output; a sidecar states it. */
export interface OutputRecord {
  readonly name: string;
  readonly bytes: number;
  /** SHA-256 of the whole file, hexadecimal. */
  readonly sha256: string;
  /**
   * SHA-256 of the numbers alone: the array's elements without the header, or a picture's pixels. Compare this one
   * between runs: compressed bytes differ between zlib builds, the numbers do not.
   */
  readonly payloadSha256?: string;
}

/** One output under its temporary name. Every failure to write is an OutputError that names the final file. */
export class OutputFile implements ByteSink {
  readonly temporaryPath: string;
  readonly #finalPath: string;
  #descriptor: number | undefined;
  /** Writes in the background that have not settled. */
  #underWay = 0;
  /** Set where the file was closed before they settled: the last of them closes it. */
  #closeLater = false;

  /** Creates the temporary file; it must not exist. */
  constructor(temporaryPath: string, finalPath: string) {
    this.temporaryPath = temporaryPath;
    this.#finalPath = finalPath;
    this.#descriptor = writing(finalPath, () => fs.openSync(temporaryPath, "wx"));
  }

  /** Write all of `bytes` at `atBytes`; a gap that no write fills reads as zeros. */
  write(bytes: NodeJS.ArrayBufferView, atBytes: number): void {
    const descriptor = this.#open();
    writing(this.#finalPath, () => {
      for (let done = 0; done < bytes.byteLength; ) {
        done += fs.writeSync(descriptor, bytes, done, bytes.byteLength - done, atBytes + done);
      }
    });
  }

  /**
   * The same in the background. `bytes` must not change, and the file not be closed, before the promise settles.
   * Two writes under way must not overlap.
   */
  async writeSoon(bytes: NodeJS.ArrayBufferView, atBytes: number): Promise<void> {
    const descriptor = this.#open();
    this.#underWay += 1;
    try {
      for (let done = 0; done < bytes.byteLength; ) {
        done += await this.#writePart(descriptor, bytes, done, atBytes);
      }
    } finally {
      this.#underWay -= 1;
      if (this.#underWay === 0 && this.#closeLater) fs.closeSync(descriptor);
    }
  }

  /** One write of the bytes from `done` on; resolves to how many were written. */
  async #writePart(descriptor: number, bytes: NodeJS.ArrayBufferView, done: number, atBytes: number) {
    if (this.#closeLater) throw new Error(`${this.#finalPath} was closed while it was written`);
    const written = await new Promise<{ fault: unknown; count: number }>((resolve) => {
      fs.write(descriptor, bytes, done, bytes.byteLength - done, atBytes + done, (fault, count) =>
        resolve({ fault, count }),
      );
    });
    return writing(this.#finalPath, () => {
      if (written.fault) throw written.fault;
      return written.count;
    });
  }

  /** Give the file its full length, so that elements which are never written are zero. */
  extendTo(lengthBytes: number): void {
    const descriptor = this.#open();
    writing(this.#finalPath, () => {
      if (fs.fstatSync(descriptor).size < lengthBytes) fs.ftruncateSync(descriptor, lengthBytes);
    });
  }

  /** Close. Some file systems report a full disk only here. */
  close(): void {
    if (this.#descriptor === undefined) return;
    const descriptor = this.#descriptor;
    this.#descriptor = undefined;
    // the number of a closed file is given to the next one opened, which a write under way would then reach
    this.#closeLater = this.#underWay > 0;
    if (!this.#closeLater) writing(this.#finalPath, () => fs.closeSync(descriptor));
  }

  #open(): number {
    if (this.#descriptor === undefined) throw new Error(`${this.#finalPath} is closed already`);
    return this.#descriptor;
  }
}

/** Run a file operation; a failure becomes an OutputError about `finalPath` that says what the user can do. */
export function writing<T>(finalPath: string, operation: () => T): T {
  try {
    return operation();
  } catch (cause) {
    const code = (cause as { code?: unknown }).code; // a system error carries `code`; others are our own fault
    if (typeof code !== "string") throw cause;
    const [rule, mend] = REASONS[code] ?? [`could not be written (${code})`, "Choose another folder."];
    throw new OutputError({ file: finalPath }, rule, mend, { cause });
  }
}

const NO_PERMISSION = [
  "may not be written here",
  "Choose another folder or change its permissions.",
] as const;
const DISK_FULL = [
  "could not be written: the disk is full",
  "Free some space or choose another folder.",
] as const;
const NOT_A_FOLDER = ["a part of its folder's path is not a folder", "Choose another folder."] as const;
const REASONS: Readonly<Record<string, readonly [rule: string, mend: string]>> = {
  ENOSPC: DISK_FULL,
  EDQUOT: ["could not be written: the disk quota is used up", DISK_FULL[1]],
  EFBIG: ["is larger than files may be here", "Choose another folder or raise the limit."],
  EACCES: NO_PERMISSION,
  EPERM: NO_PERMISSION,
  EROFS: ["could not be written: the file system is read-only", NO_PERMISSION[1]],
  ENOTDIR: NOT_A_FOLDER,
  EEXIST: NOT_A_FOLDER, // what mkdir says of a path that is a file; temporary names are unique
  ENAMETOOLONG: ["has too long a name", "Choose a shorter name."],
};

/** SHA-256 and size of a file; SHA-256 of a part of it where that was asked for. */
export interface FileHashes {
  readonly bytes: number;
  readonly sha256: string;
  readonly payloadSha256: string | undefined;
}

/** A file of so many bytes is hashed at once: quicker than any waiting. */
const SMALL_BYTES = 2 ** 21;

/** SHA-256 of a file, and of it from `payloadStart` on; reads in pieces and lets signals in between them. */
export async function hashFile(file: string, payloadStart: number | undefined): Promise<FileHashes> {
  const size = fs.statSync(file).size;
  if (size <= SMALL_BYTES) {
    const bytes = fs.readFileSync(file);
    const part = payloadStart === undefined ? undefined : sha256(bytes.subarray(payloadStart));
    return { bytes: bytes.length, sha256: sha256(bytes), payloadSha256: part };
  }
  const whole = createHash("sha256");
  const payload = payloadStart === undefined ? undefined : createHash("sha256");
  const piece = new Uint8Array(4 * 2 ** 20);
  const handle = await fs.promises.open(file, "r");
  try {
    let position = 0;
    for (;;) {
      const { bytesRead } = await handle.read(piece, 0, piece.length, position);
      if (bytesRead === 0) break;
      const part = piece.subarray(0, bytesRead);
      whole.update(part);
      payload?.update(part.subarray(Math.max(0, (payloadStart ?? 0) - position)));
      position += bytesRead;
    }
    return { bytes: position, sha256: whole.digest("hex"), payloadSha256: payload?.digest("hex") };
  } finally {
    await handle.close();
  }
}

/** SHA-256 of bytes in memory, hexadecimal. */
export function sha256(bytes: NodeJS.ArrayBufferView): string {
  return createHash("sha256").update(bytes).digest("hex");
}
