import { parentPort } from "node:worker_threads";
import { hashFile } from "../writers/output-file.js";
import type { HashReply, HashRequest } from "./hasher.js";

/** The thread of a Hasher: one file after the other, in the order of asking. */
const port = parentPort!;
let last: Promise<void> = Promise.resolve();

port.on("message", ({ id, file, payloadStart }: HashRequest) => {
  last = last
    .then(() => hashFile(file, payloadStart))
    .then((hashes) => port.postMessage({ id, hashes } satisfies HashReply))
    .catch((error) => port.postMessage({ id, error } satisfies HashReply));
});
