// Bundle the command line and the library into dist/, and emit the library's types.
import { execFileSync } from "node:child_process";
import { chmodSync, readFileSync, rmSync, writeFileSync } from "node:fs";
import { resolve } from "node:path";
import { fileURLToPath } from "node:url";
import { build } from "esbuild";

const root = fileURLToPath(new URL("..", import.meta.url));
rmSync(`${root}dist`, { recursive: true, force: true });

// Some bundled packages are CommonJS and call require for node's own modules.
const banner = {
  js: 'import { createRequire as requireFor } from "node:module"; const require = requireFor(import.meta.url);',
};

// "FILE?raw" is the file as text, as in vite, with which the tests run the sources.
const rawText = {
  name: "raw-text",
  setup({ onResolve, onLoad }) {
    onResolve({ filter: /\?raw$/ }, ({ path, resolveDir }) => ({
      path: resolve(resolveDir, path.replace(/\?raw$/, "")),
      namespace: "raw-text",
    }));
    onLoad({ filter: /./, namespace: "raw-text" }, ({ path }) => ({
      contents: readFileSync(path, "utf8"),
      loader: "text",
    }));
  },
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
  plugins: [rawText],
  logLevel: "warning",
});
// npx and npm link need the executable bit, and the first line must name the interpreter.
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
