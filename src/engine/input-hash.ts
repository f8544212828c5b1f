import { createHash } from "node:crypto";
import { createReadStream, statSync } from "node:fs";
import { Worker } from "node:worker_threads";
import { workerFile } from "./crew.js";

export interface InputHash {
  readonly sha256: string;
  readonly bytes: number;
}

/** Below this many bytes hashing takes less time than starting a thread for it. */
const WORTH_A_THREAD_BYTES = 24e6;

/** SHA-256 and size of a file, computed beside the main thread where that pays. */
export function hashInput(file: string, signal?: AbortSignal): Promise<InputHash> {
  const thread = workerFile("hash-worker.js");
  if (thread === undefined || statSync(file).size < WORTH_A_THREAD_BYTES) return hashFile(file, signal);
  return new Promise((resolve, reject) => {
    const worker = new Worker(thread, { workerData: file });
    worker.once("message", resolve);
    worker.once("error", reject);
    signal?.addEventListener("abort", () => void worker.terminate(), { once: true });
  });
}

export async function hashFile(file: string, signal?: AbortSignal): Promise<InputHash> {
  const hash = createHash("sha256");
  let bytes = 0;
  for await (const piece of createReadStream(file, { highWaterMark: 1 << 20, ...(signal && { signal }) })) {
    hash.update(piece as Buffer);
    bytes += (piece as Buffer).length;
  }
  return { sha256: hash.digest("hex"), bytes };
}
