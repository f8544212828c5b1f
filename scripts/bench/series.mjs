// Speed of the stages that look across echoes against a NumPy script of the same methods (series_numpy.py, same folder):
//   node scripts/bench/series.mjs [--turns 3]
// 256 x 256, 16 channels, 8 slices; one thread each. Makes its files with `carillon simulate` in the system's temporary
// folder (once, a minute), runs tool and script in turn, prints medians a slice. Needs Debian's python3-numpy python3-scipy.
import { spawnSync } from "node:child_process";
import { existsSync, mkdirSync, readFileSync, writeFileSync } from "node:fs";
import { tmpdir } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { parseArgs } from "node:util";

const { values: flags } = parseArgs({ options: { turns: { type: "string", default: "3" } } });
const PYTHON = "/usr/bin/python3";
const SLICES = 8;
const here = fileURLToPath(new URL(".", import.meta.url));
const tool = fileURLToPath(new URL("../../dist/carillon.js", import.meta.url));
const folder = join(tmpdir(), "carillon-bench-series");
mkdirSync(folder, { recursive: true });

function run(words) {
  const env = { ...process.env, OPENBLAS_NUM_THREADS: "1" };
  for (const name of ["OPENBLAS_CORETYPE", "OPENBLAS_L2_SIZE"]) delete env[name];
  const done = spawnSync(words[0], words.slice(1), { env, encoding: "utf8", maxBuffer: 2 ** 28 });
  if (done.status !== 0) throw new Error(`${words.join(" ")}\n${done.stderr}`);
  return done.stdout;
}
const carillon = (...words) => JSON.parse(run([process.execPath, tool, ...words, "--json", "--quiet"]));

/** A raw file with these echo times, and its channel images for the script. */
function prepare(name, echoMs) {
  const raw = join(folder, `${name}.h5`);
  const images = join(folder, name);
  if (!existsSync(join(images, "image.json"))) {
    const times = echoMs.flatMap((ms) => ["--te-ms", String(ms)]);
    const size = ["--matrix", "256", "--coils", "16", "--slices", String(SLICES), "--dwell-us", "9"];
    carillon("simulate", ...size, ...times, "--field-slope", "0.8,-0.4", "--force", "--out", raw);
    carillon("recon", raw, "--out", images, "--save", "coils", "--force");
  }
  const scan = JSON.parse(readFileSync(join(images, "image.json"), "utf8")).scan;
  const facts = {
    seconds: scan.echoTimesMs.map((ms) => ms * 1e-3),
    pixelHz: scan.echoTimesMs.map(() => scan.bandwidthPerPixelHz),
    resonanceHz: scan.resonanceHz,
  };
  return { raw, images: join(images, "coil-images.npy"), facts };
}

const two = prepare("two", [3.1, 5.2]);
const three = prepare("three", [3.1, 4.5, 5.9]);
const facts = join(folder, "facts.json");
writeFileSync(facts, JSON.stringify({ two: two.facts, three: three.facts }));

function ours() {
  const common = [
    "--workers",
    "1",
    "--force",
    "--set",
    "outputs.pictures=false",
    "--out",
    join(folder, "ours"),
  ];
  const straight = carillon("recon", two.raw, "--undisplace", "measured", ...common).timings;
  const parts = carillon("recon", three.raw, "--separate", "fat-water", ...common).timings;
  return { ...straight, "separate-fat-water": parts["separate-fat-water"] };
}
function script() {
  return JSON.parse(
    run([PYTHON, join(here, "series_numpy.py"), two.images, three.images, facts, join(folder, "script.npz")]),
  );
}

const median = (values) => values.sort((a, b) => a - b)[Math.floor(values.length / 2)];
const STAGES = ["field-map", "undisplace", "separate-fat-water"];
const times = STAGES.map(() => ({ tool: [], script: [] }));
for (let turn = 0; turn < Number(flags.turns); turn++) {
  const [a, b] = [ours(), script()];
  STAGES.forEach((stage, i) => {
    times[i].tool.push((1e3 * a[stage]) / SLICES);
    times[i].script.push(1e3 * b[stage]);
  });
}
console.log("| stage, ms a slice | tool | script | tool / script |\n|---|---|---|---|");
STAGES.forEach((stage, i) => {
  const [a, b] = [median(times[i].tool), median(times[i].script)];
  console.log(`| ${stage} | ${a.toFixed(0)} | ${b.toFixed(0)} | ${(a / b).toFixed(2)} |`);
});
