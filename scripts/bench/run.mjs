// Speed and memory against the script that a lab would write by hand (recon_numpy.py, same folder):
//   node scripts/bench/run.mjs [--turns 7] [--only NAME ...] [--keep]
// Makes the files in the system's temporary folder, runs tool and script in turn, whole processes, and prints medians,
// their spread and ratios. Needs Debian's python3-h5py python3-numpy python3-scipy time. Build first: npm run build.
// Both write the combined image and the complex images of all channels; the tool writes picture and sidecar besides.
import { spawnSync } from "node:child_process";
import { existsSync, mkdirSync, readFileSync, renameSync, rmSync } from "node:fs";
import { availableParallelism, tmpdir, totalmem } from "node:os";
import { join } from "node:path";
import { fileURLToPath } from "node:url";
import { parseArgs } from "node:util";

const { values: flags } = parseArgs({
  options: {
    turns: { type: "string", default: "7" },
    only: { type: "string", multiple: true },
    keep: { type: "boolean" },
  },
});
const TURNS = Number(flags.turns);
const PYTHON = "/usr/bin/python3";
const here = fileURLToPath(new URL(".", import.meta.url));
const tool = fileURLToPath(new URL("../../dist/carillon.js", import.meta.url));
const folder = join(tmpdir(), "carillon-bench");
mkdirSync(folder, { recursive: true });

/** name, shape of the file, window, workers. */
const CASES = [
  ["benchmark file, 2 workers", {}, "hann", 2],
  ["benchmark file, 1 worker", {}, "hann", 1],
  ["without a window, 2 workers", {}, "none", 2],
  ["16 slices, 2 workers", { slices: 16 }, "hann", 2],
  ["40 slices (671 MB), 2 workers", { slices: 40 }, "hann", 2],
  ["320 x 320, 2 workers", { lines: 320, samples: 640, slices: 4 }, "hann", 2],
  ["384 x 384, 2 workers", { lines: 384, samples: 768, slices: 4 }, "hann", 2],
  ["372 x 372, 2 workers", { lines: 372, samples: 744, slices: 4 }, "hann", 2],
  ["251 x 251, 2 workers", { lines: 251, samples: 502, slices: 8 }, "hann", 2],
  ["one small slice (96 x 96, 4 channels)", { lines: 96, samples: 192, slices: 1, coils: 4 }, "hann", 2],
];

function rawFile(shape) {
  const words = Object.entries(shape).flatMap(([key, value]) => [`--${key}`, String(value)]);
  const file = join(folder, `raw${words.join("")}.h5`);
  if (!existsSync(file)) {
    run([PYTHON, join(here, "make_bench_raw.py"), `${file}.part`, ...words]);
    renameSync(`${file}.part`, file); // an interrupted run leaves no half file under the name
  }
  return file;
}

/** Seconds and peak megabytes of a process. */
function run(words) {
  const env = { ...process.env };
  if (words[0] === PYTHON) for (const name of ["OPENBLAS_CORETYPE", "OPENBLAS_L2_SIZE"]) delete env[name];
  const start = performance.now();
  const done = spawnSync("/usr/bin/time", ["-f", "%M", ...words], { env, encoding: "utf8" });
  const seconds = (performance.now() - start) / 1e3;
  if (done.status !== 0) throw new Error(`${words.join(" ")}\n${done.stderr}`);
  return { seconds, megabytes: Number(done.stderr.trim().split("\n").at(-1)) / 1024 };
}

function median(values) {
  const sorted = [...values].sort((a, b) => a - b);
  return sorted[Math.floor(sorted.length / 2)];
}

const spread = (values) => `${Math.min(...values).toFixed(2)}-${Math.max(...values).toFixed(2)}`;

function compare([name, shape, window, workers]) {
  const raw = rawFile(shape);
  const out = join(folder, "out");
  const ours = [];
  const theirs = [];
  const apodize = window === "none" ? [] : ["--set", `apodize.window=${window}`];
  for (let turn = 0; turn < TURNS; turn++) {
    rmSync(out, { recursive: true, force: true });
    ours.push(
      run([
        process.execPath,
        tool,
        "recon",
        raw,
        "--out",
        out,
        "--quiet",
        "--save",
        "coils",
        "--workers",
        String(workers),
        ...apodize,
      ]),
    );
    theirs.push(
      run([
        PYTHON,
        join(here, "recon_numpy.py"),
        raw,
        join(folder, "numpy"),
        "--workers",
        String(workers),
        "--window",
        window,
      ]),
    );
  }
  const seconds = (runs) => runs.map((each) => each.seconds);
  const memory = (runs) => median(runs.map((each) => each.megabytes));
  const ratios = ours.map((each, i) => each.seconds / theirs[i].seconds);
  const row = [
    name,
    `${median(seconds(ours)).toFixed(2)} (${spread(seconds(ours))})`,
    `${median(seconds(theirs)).toFixed(2)} (${spread(seconds(theirs))})`,
    `${median(ratios).toFixed(2)} (${spread(ratios)})`,
    `${memory(ours).toFixed(0)} / ${memory(theirs).toFixed(0)}`,
    (memory(ours) / memory(theirs)).toFixed(2),
    relativeDifference(join(out, "image.npy"), join(folder, "numpy.npy")).toExponential(1),
  ];
  console.log(`| ${row.join(" | ")} |`);
}

/** ||a - b|| / ||b|| of two float32 arrays of the same shape. */
function relativeDifference(fileA, fileB) {
  const read = (file) => {
    const bytes = readFileSync(file);
    const start = 10 + bytes.readUInt16LE(8);
    return new Float32Array(bytes.buffer.slice(bytes.byteOffset + start, bytes.byteOffset + bytes.length));
  };
  const a = read(fileA);
  const b = read(fileB);
  let difference = 0;
  let norm = 0;
  for (let i = 0; i < b.length; i++) {
    difference += (a[i] - b[i]) ** 2;
    norm += b[i] ** 2;
  }
  return a.length === b.length ? Math.sqrt(difference / norm) : Number.NaN;
}

console.log(
  `${new Date().toISOString().slice(0, 10)}, ${availableParallelism()} cores, ${Math.round(totalmem() / 2 ** 30)} GiB, medians of ${TURNS}\n`,
);
console.log("| case | tool, s | script, s | tool / script | MB, tool / script | ratio | images differ by |");
console.log("|---|---|---|---|---|---|---|");
for (const each of CASES) if (!flags.only || flags.only.some((part) => each[0].includes(part))) compare(each);
if (!flags.keep) rmSync(folder, { recursive: true });
