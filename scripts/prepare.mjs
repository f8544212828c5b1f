// Before demo and tests: install what the lock file names and build, each only where it is not done yet.
import { execSync } from "node:child_process";
import { existsSync, readdirSync, statSync } from "node:fs";
import { join } from "node:path";
import { fileURLToPath } from "node:url";

const root = fileURLToPath(new URL("..", import.meta.url));
const modified = (path) => (existsSync(path) ? statSync(path).mtimeMs : 0);
const newest = (folder) =>
  Math.max(
    modified(folder),
    ...readdirSync(folder, { withFileTypes: true }).map((entry) =>
      entry.isDirectory() ? newest(join(folder, entry.name)) : modified(join(folder, entry.name)),
    ),
  );

// npm writes this file at the end of an install. Dev dependencies are needed even where NODE_ENV is production.
if (modified(join(root, "node_modules/.package-lock.json")) < modified(join(root, "package-lock.json")))
  execSync("npm ci --include=dev --no-audit --no-fund --loglevel=error", { cwd: root, stdio: "inherit" });

const sources = Math.max(
  newest(join(root, "src")),
  modified(join(root, "package.json")),
  modified(join(root, "scripts/build.mjs")),
);
if (modified(join(root, "dist/types/src/index.d.ts")) < sources)
  execSync("node scripts/build.mjs", { cwd: root, stdio: "inherit" });
