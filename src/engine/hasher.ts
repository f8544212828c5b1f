import { statSync } from "node:fs";
import { Worker } from "node:worker_threads";
import { type FileHashes, hashFile } from "../writers/output-file.js";
import { workerFile, YOUNG_HEAP } from "./crew.js";

export interface HashRequest {
  readonly id: number;
  readonly file: string;
  readonly payloadStart: number | undefined;
}
export type HashReply = { readonly id: number } & (
  | { readonly hashes: FileHashes }
  | { readonly error: unknown }
);

/** Below this many bytes hashing takes less time than starting a thread for it. */
const WORTH_A_THREAD_BYTES = 24e6;

/** Computes SHA-256 of input and outputs: in a thread of its own beside the reconstruction where that pays. */
export class Hasher {
  readonly #thread: Worker | undefined;
  readonly #waiting = new Map<number, { resolve(hashes: FileHashes): void; reject(error: unknown): void }>();
  #next = 0;

  /** @param input the file whose size decides whether a thread is worth it */
  constructor(input: string) {
    const bytes = statSync(input, { throwIfNoEntry: false })?.size ?? 0;
    const script = bytes < WORTH_A_THREAD_BYTES ? undefined : workerFile("hash-worker.js");
    if (script === undefined) return;
    this.#thread = new Worker(script, { resourceLimits: YOUNG_HEAP });
    this.#thread.on("message", (reply: HashReply) => {
      const entry = this.#waiting.get(reply.id);
      this.#waiting.delete(reply.id);
      if ("hashes" in reply) entry?.resolve(reply.hashes);
      else entry?.reject(reply.error);
    });
    this.#thread.on("error", (error) => {
      for (const { reject } of this.#waiting.values()) reject(error);
      this.#waiting.clear();
    });
  }

  /** SHA-256 of a file, and of it from `payloadStart` on. */
  hash(file: string, payloadStart?: number): Promise<FileHashes> {
    const thread = this.#thread;
    if (!thread) return hashFile(file, payloadStart);
    const id = this.#next++;
    return new Promise((resolve, reject) => {
      this.#waiting.set(id, { resolve, reject });
      thread.postMessage({ id, file, payloadStart } satisfies HashRequest);
    });
  }

  dismiss(): void {
    void this.#thread?.terminate();
  }
}
