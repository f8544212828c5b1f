// Speed of the SIMD transform against scipy.fft (complex64, one thread each), 2-D, several images at a time:
//   node scripts/bench/transform.mjs [python]
// The two take turns; a figure is the median of the turns. GFLOP/s counts 5 n log2(n) operations a transform. In place,
// and from one array to another; ours is centred besides, and works image by image, columns first.
import { spawn } from "node:child_process";
import { createInterface } from "node:readline";
import { fileURLToPath } from "node:url";
import { build } from "esbuild";

const SIZES = [
  [256, 256],
  [512, 256],
  [320, 320],
  [384, 384],
  [370, 372],
  [257, 251],
];
const IMAGES = 8;
const TURNS = 15;
const SECONDS_A_TURN = 0.05;

const bundle = await build({
  entryPoints: [fileURLToPath(new URL("../../src/kernels/simd-transform.ts", import.meta.url))],
  bundle: true,
  write: false,
  format: "esm",
});
const { createSimdEngine } = await import(
  `data:text/javascript;base64,${Buffer.from(bundle.outputFiles[0].contents).toString("base64")}`
);
const engine = createSimdEngine();

const python = spawn(
  process.argv[2] ?? "python3",
  [fileURLToPath(new URL("transform.py", import.meta.url))],
  {
    stdio: ["pipe", "pipe", "inherit"],
  },
);
const answers = createInterface({ input: python.stdout })[Symbol.asyncIterator]();

async function scipySeconds(height, width, repeats) {
  python.stdin.write(`${height} ${width} ${IMAGES} ${repeats}\n`);
  return (await answers.next()).value.split(" ").map(Number);
}

function simdSeconds(source, target, height, width, repeats) {
  const floats = 2 * height * width;
  const start = performance.now();
  for (let r = 0; r < repeats; r++) {
    for (let i = 0; i < IMAGES; i++) {
      const from = source.subarray(i * floats, (i + 1) * floats);
      const to = target.subarray(i * floats, (i + 1) * floats);
      engine.transformAxis({
        source: from,
        target: to,
        outer: 1,
        length: height,
        inner: width,
        inverse: false,
      });
      engine.transformAxis({
        source: to,
        target: to,
        outer: height,
        length: width,
        inner: 1,
        inverse: false,
      });
    }
  }
  return (performance.now() - start) / 1000 / repeats;
}

const median = (list) => list.sort((a, b) => a - b)[Math.floor(list.length / 2)];

console.log("GFLOP/s    in place             to another array");
console.log("size       scipy   ours ratio   scipy   ours ratio");
for (const [height, width] of SIZES) {
  const source = engine.allocate(2 * IMAGES * height * width);
  const target = engine.allocate(source.length);
  for (let i = 0; i < source.length; i++) source[i] = Math.sin(i * i);
  const repeats = Math.max(1, Math.round(SECONDS_A_TURN / simdSeconds(source, target, height, width, 3)));
  const turns = { theirsInside: [], theirsAcross: [], inside: [], across: [] };
  for (let turn = 0; turn < TURNS; turn++) {
    const [inside, across] = await scipySeconds(height, width, repeats);
    turns.theirsInside.push(inside);
    turns.theirsAcross.push(across);
    simdSeconds(source, source, height, width, 3); // back into the cache, as scipy's turn begins too
    turns.inside.push(simdSeconds(source, source, height, width, repeats));
    turns.across.push(simdSeconds(source, target, height, width, repeats));
  }
  const gflops = (time) =>
    ((5 * IMAGES * height * width * Math.log2(height * width)) / time / 1e9).toFixed(1).padStart(7);
  const columns = (theirs, ours) =>
    `${gflops(theirs)}${gflops(ours)}${(theirs / ours).toFixed(2).padStart(6)}`;
  const inside = columns(median(turns.theirsInside), median(turns.inside));
  const across = columns(median(turns.theirsAcross), median(turns.across));
  console.log(`${`${height}x${width}`.padEnd(9)}${inside} ${across}`);
  engine.release(source);
  engine.release(target);
}
python.stdin.end();
