import { parentPort, workerData } from "node:worker_threads";
import { hashFile } from "./input-hash.js";

// The file's name comes as a string from hashInput.
parentPort!.postMessage(await hashFile(workerData as string));
