import { spawn } from "node:child_process";
import { mkdtempSync, readFileSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, beforeAll, describe, expect, test } from "vitest";
import { simulateRaw } from "../../src/simulate/index.js";

/** Workers run the built bundle, so these tests run the built command. */
const BIN = path.resolve("dist/carillon.js");
const folder = mkdtempSync(path.join(tmpdir(), "carillon-run-"));
afterAll(() => rmSync(folder, { recursive: true }));

function carillon(...words: string[]): Promise<{ code: number | null; stdout: string; stderr: string }> {
  return new Promise((resolve) => {
    const child = spawn(process.execPath, [BIN, ...words], { stdio: ["ignore", "pipe", "pipe"] });
    let stdout = "";
    let stderr = "";
    child.stdout.on("data", (text) => {
      stdout += text;
    });
    child.stderr.on("data", (text) => {
      stderr += text;
    });
    child.on("close", (code) => resolve({ code, stdout, stderr }));
  });
}

/** SHA-256 of every array of a reconstruction, from its sidecar. */
async function arrays(raw: string, ...flags: string[]): Promise<Record<string, string>> {
  const out = path.join(folder, `out-${flags.join("_").replace(/[^a-z0-9]+/gi, "-")}`);
  const done = await carillon("recon", raw, "--out", out, "--quiet", "--save", "coils", "--force", ...flags);
  expect(done.stderr).toBe("");
  const { outputs } = JSON.parse(readFileSync(path.join(out, "image.json"), "utf8"));
  return Object.fromEntries(
    outputs.map((o: { name: string; payloadSha256: string }) => [o.name, o.payloadSha256]),
  );
}

describe("the same bits for any number of workers, any block size, any memory", () => {
  // Large enough (25 MB) that workers start; two averages, so that some lines are added to others.
  const raw = path.join(folder, "large.h5");
  beforeAll(async () => {
    await simulateRaw({
      file: raw,
      matrix: { x: 160, y: 150 },
      coils: 9,
      slices: 4,
      averages: 2,
      readoutOversampling: 2,
      noise: { sigma: 0.02, readouts: 4 },
      seed: 3,
    });
  });

  test("1, 2, 3 and 4 workers; blocks of 1, 7 and 64; memory for a part of the images", async () => {
    const window = ["--set", "apodize.window=hamming"];
    const reference = await arrays(raw, ...window, "--workers", "1");
    expect(Object.keys(reference)).toEqual(["image.npy", "coil-images.npy", "image.png"]);
    for (const flags of [
      ["--workers", "2"],
      ["--workers", "3"],
      ["--workers", "4"],
      ["--workers", "1", "--block", "1"],
      ["--workers", "3", "--block", "7"],
      ["--workers", "2", "--block", "64"],
      // 1.7 MB an image, and four are open at a time: some wait for another pass over the file
      ["--workers", "1", "--memory", "5", "--block", "7"],
    ])
      expect(await arrays(raw, ...window, ...flags), flags.join(" ")).toEqual(reference);
  });

  test("memory that does not hold one image is refused", async () => {
    const big = path.join(folder, "big.h5");
    await simulateRaw({ file: big, matrix: { x: 256, y: 256 }, coils: 2, slices: 1 });
    const done = await carillon("recon", big, "--out", path.join(folder, "none"), "--memory", "1", "--quiet");
    expect(done.code).toBe(2);
    expect(done.stderr).toMatch(/--memory: too little: one image needs 2 MB/);
  });
});

test("the plain engine agrees with the SIMD one to 1e-6 and says that it ran", async () => {
  const raw = "data/conformance/oblique.h5";
  const out = (transform: string) => path.join(folder, transform);
  for (const transform of ["plain", "simd"]) {
    const done = await carillon(
      "recon",
      raw,
      "--out",
      out(transform),
      "--transform",
      transform,
      "--json",
      "--quiet",
    );
    expect(JSON.parse(done.stdout).transform).toBe(transform);
  }
  const values = (transform: string) => {
    const bytes = readFileSync(path.join(out(transform), "image.npy"));
    return new Float32Array(bytes.buffer.slice(bytes.byteOffset + 128, bytes.byteOffset + bytes.length));
  };
  const plain = values("plain");
  const simd = values("simd");
  let difference = 0;
  let norm = 0;
  plain.forEach((value, i) => {
    difference += (value - simd[i]!) ** 2;
    norm += value ** 2;
  });
  // float32 transforms of length 144: each has an error near 2e-7 against float64
  expect(Math.sqrt(difference / norm)).toBeLessThan(1e-6);
});
