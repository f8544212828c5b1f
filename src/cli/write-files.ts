import path from "node:path";
import { UsageError } from "../errors.js";
import { OutputSet } from "../writers/output-set.js";

/**
 * Write some files, whole or not at all, folders made.
 * @throws UsageError where one exists and `force` is not set, or two have one name; OutputError where one cannot be written
 */
export async function writeFiles(
  files: readonly { readonly file: string; readonly bytes: Uint8Array | string }[],
  force: boolean,
): Promise<void> {
  const twice = files.find(({ file }, i) =>
    files.slice(0, i).some((other) => path.resolve(other.file) === path.resolve(file)),
  );
  if (twice)
    throw new UsageError({ file: twice.file }, "is to hold two outputs", "Give each a name of its own.");
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
