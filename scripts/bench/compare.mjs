// What comparing eight windows costs against one reconstruction, whole processes, alternating, medians with their range:
//   node scripts/bench/compare.mjs [--turns 11]
// On the benchmark file of run.mjs (make_bench_raw.py; needs Debian's python3-h5py python3-numpy).
import { spawnSync } from "node:child_process";
import { existsSync, mkdirSync, renameSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { parseArgs } from "node:util";

const { values: flags } = parseArgs({ options: { turns: { type: "string", default: "11" } } });
const here = fileURLToPath(new URL(".", import.meta.url));
const tool = fileURLToPath(new URL("../../dist/carillon.js", import.meta.url));
const folder = join(tmpdir(), "carillon-bench");
mkdirSync(folder, { recursive: true });

function seconds(words) {
  const start = performance.now();
  const done = spawnSync(words[0], words.slice(1), { encoding: "utf8" });
  if (done.status !== 0) throw new Error(`${words.join(" ")}\n${done.stderr}`);
  return (performance.now() - start) / 1e3;
}
const carillon = (...words) => seconds([process.execPath, tool, ...words, "--force", "--quiet"]);

const raw = join(folder, "raw.h5");
if (!existsSync(raw)) {
  seconds(["/usr/bin/python3", join(here, "make_bench_raw.py"), `${raw}.part`]);
  renameSync(`${raw}.part`, raw);
}
const WINDOWS = "none,hann,hamming,blackman,welch,lanczos,tukey:0.5,kaiser:6";
const median = (values) => [...values].sort((a, b) => a - b)[Math.floor(values.length / 2)];
const [one, eight] = [[], []];
for (let turn = 0; turn < Number(flags.turns); turn++) {
  one.push(carillon("recon", raw, "--out", join(folder, "one")));
  eight.push(carillon("compare", raw, "--out", join(folder, "eight"), "--vary", `apodize.window=${WINDOWS}`));
}
const ratios = eight.map((value, i) => value / one[i]);
console.log("| recon, s | compare of 8 windows, s | ratio |\n|---|---|---|");
const ranged = (values) =>
  `${median(values).toFixed(2)} (${Math.min(...values).toFixed(2)}-${Math.max(...values).toFixed(2)})`;
console.log(`| ${ranged(one)} | ${ranged(eight)} | ${ranged(ratios)} |`);
