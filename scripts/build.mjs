// Bundle the command line and the library into dist/, and emit the library's types.
import { execFileSync } from "node:child_process";
import { chmodSync, rmSync } from "node:fs";
import { fileURLToPath } from "node:url";
import { build } from "esbuild";

const root = fileURLToPath(new URL("..", import.meta.url));
rmSync(`${root}dist`, { recursive: true, force: true });

// Some bundled packages are CommonJS and call require for node's own modules.
const banner = {
  js: 'import { createRequire as requireFor } from "node:module"; const require = requireFor(import.meta.url);',
};

await build({
  absWorkingDir: root,
  entryPoints: {
    carillon: "src/cli/carillon.ts",
    index: "src/index.ts",
    worker: "src/engine/worker.ts",
    "hash-worker": "src/engine/hash-worker.ts",
  },
  outdir: "dist",
  bundle: true,
  splitting: true,
  format: "esm",
  platform: "node",
  target: "node20",
  chunkNames: "chunks/[name]-[hash]",
  external: ["h5wasm"],
  banner,
  logLevel: "warning",
});
// npx and npm link need the executable bit, and the first line must name the interpreter.
const { readFileSync, writeFileSync } = await import("node:fs");
const bin = `${root}dist/carillon.js`;
writeFileSync(bin, `#!/usr/bin/env node\n${readFileSync(bin, "utf8")}`);
chmodSync(bin, 0o755);

execFileSync(
  process.execPath,
  [`${root}node_modules/typescript/bin/tsc`, "-p", `${root}scripts/tsconfig.types.json`],
  {
    stdio: "inherit",
  },
);
