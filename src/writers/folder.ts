import fs from "node:fs";
import path from "node:path";

/**
 * Make a folder and its missing parents; gives those that were made, deepest first.
 * They are made one by one: Node's recursive mkdir never returns where a file system refuses a new name in the words
 * of a missing parent, as /proc does.
 * @throws the system's error; the folders made until then are removed
 */
export function makeFolder(folder: string): string[] {
  const missing: string[] = [];
  for (let at = path.resolve(folder); !fs.existsSync(at); at = path.dirname(at)) missing.unshift(at);
  const made: string[] = [];
  try {
    for (const at of missing) if (makeOne(at)) made.unshift(at);
    if (!fs.statSync(folder).isDirectory()) makeOne(folder); // gives the system's error
  } catch (fault) {
    removeFolders(made);
    throw fault;
  }
  return made;
}

/** Remove folders that `makeFolder` made, as far as they are empty. Never throws. */
export function removeFolders(made: readonly string[]): void {
  try {
    for (const folder of made) fs.rmdirSync(folder);
  } catch {
    // Somebody else uses it by now; its parents are not empty either.
  }
}

/** Whether the folder was made; false where another process was quicker. */
function makeOne(folder: string): boolean {
  try {
    fs.mkdirSync(folder);
    return true;
  } catch (fault) {
    if (fs.statSync(folder, { throwIfNoEntry: false })?.isDirectory()) return false;
    throw fault;
  }
}
