import path from "node:path";
import { OutputSet } from "../writers/output-set.js";

/**
 * Write some files, whole or not at all, folders made.
 * @throws UsageError where one exists and `force` is not set; OutputError where one cannot be written
 */
export async function writeFiles(
  files: readonly { readonly file: string; readonly bytes: Uint8Array | string }[],
  force: boolean,
): Promise<void> {
  // Every set checks what exists before the first is written.
  const sets = files.map(({ file }) => {
    return new OutputSet({ folder: path.dirname(file), names: [path.basename(file)], force });
  });
  try {
    files.forEach(({ file, bytes }, i) => void sets[i]!.write(path.basename(file), bytes));
    for (const set of sets) await set.seal();
    for (const set of sets) set.commit();
  } catch (error) {
    for (const set of sets) set.abort();
    throw error;
  }
}
