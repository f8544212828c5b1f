import { spawn, spawnSync } from "node:child_process";
import { createHash, pbkdf2 } from "node:crypto";
import { once } from "node:events";
import fs from "node:fs";
import os from "node:os";
import path from "node:path";
import { promisify } from "node:util";
import { buildSync } from "esbuild";
import { afterAll, afterEach, beforeAll, beforeEach, describe, expect, test } from "vitest";
import { OutputError, UsageError } from "../../src/errors.js";
import { readNpy } from "../../src/writers/npy.js";
import { OutputSet } from "../../src/writers/output-set.js";

let root = "";
let folder = "";
beforeEach(() => {
  root = fs.mkdtempSync(path.join(os.tmpdir(), "set-"));
  folder = path.join(root, "a", "b");
});
afterEach(() => fs.rmSync(root, { recursive: true }));

const SET = { names: ["image.npy", "picture.png"], sidecar: "image.json" };

/** A whole set whose files hold `text`, and the records that `seal` gave. */
async function writeSet(text: string, force = false) {
  const set = new OutputSet({ folder, force, ...SET });
  set.write("picture.png", text);
  const npy = set.createNpy("image.npy", "<i4", [2, 3]);
  await npy.writeAt(3, Int32Array.of(4, 5, 6));
  const records = await set.seal();
  set.commit(`{"text":"${text}"}`);
  return records;
}

function contents(at = folder): Record<string, string> {
  return Object.fromEntries(
    fs.readdirSync(at).map((name) => [name, fs.readFileSync(path.join(at, name), "latin1")]),
  );
}

test("a set appears whole, in a folder made with its parents, and leaves nothing else", async () => {
  await writeSet("one");
  expect(Object.keys(contents()).sort()).toEqual(["image.json", "image.npy", "picture.png"]);
  // elements that were never written are zero
  expect(readNpy(path.join(folder, "image.npy")).data).toEqual(Int32Array.of(0, 0, 0, 4, 5, 6));
});

test("records hold the SHA-256 of each file and of an array's elements, in the order of the names", async () => {
  const records = await writeSet("one");
  const hash = (bytes: Uint8Array) => createHash("sha256").update(bytes).digest("hex");
  const npy = fs.readFileSync(path.join(folder, "image.npy"));
  expect(records).toEqual([
    { name: "image.npy", bytes: 152, sha256: hash(npy), payloadSha256: hash(npy.subarray(128)) },
    // SHA-256 of "one": computed with sha256sum
    {
      name: "picture.png",
      bytes: 3,
      sha256: "7692c3ad3540bb803c020b3aee66cd8887123234ea0c6e7143c0add73ff431ed",
    },
  ]);
});

test("before the commit there are only temporary names, and abort removes them and the folders it made", async () => {
  const set = new OutputSet({ folder, ...SET });
  set.write("picture.png", "x");
  set.createNpy("image.npy", "<f4", [4]);
  const names = Object.keys(contents()).sort();
  expect(names).toEqual([
    `.carillon-image.npy.${process.pid}.tmp`,
    `.carillon-picture.png.${process.pid}.tmp`,
  ]);
  set.abort();
  expect(fs.readdirSync(root)).toEqual([]);
  set.abort(); // twice is harmless
  expect(() => set.commit("{}")).toThrow("over already");
});

test("abort keeps a folder that existed, and files of others in it", () => {
  fs.mkdirSync(folder, { recursive: true });
  fs.writeFileSync(path.join(folder, "other"), "mine");
  const set = new OutputSet({ folder, ...SET });
  set.write("picture.png", "x");
  set.abort();
  expect(contents()).toEqual({ other: "mine" });
});

test("abort after the commit leaves the set", async () => {
  const set = new OutputSet({ folder, names: ["a.svg"] });
  set.write("a.svg", "<svg/>");
  await set.seal();
  set.commit();
  set.abort();
  expect(contents()).toEqual({ "a.svg": "<svg/>" });
});

test.each(["image.npy", "picture.png", "image.json"])(
  "an existing %s is refused before anything is written",
  (name) => {
    fs.mkdirSync(folder, { recursive: true });
    fs.writeFileSync(path.join(folder, name), "old");
    let fault: unknown;
    try {
      new OutputSet({ folder, ...SET });
    } catch (caught) {
      fault = caught;
    }
    expect(fault).toBeInstanceOf(UsageError);
    expect(fault).toMatchObject({ exitCode: 2 });
    expect((fault as UsageError).message).toBe(
      `${path.join(folder, name)}: exists already. Add --force to replace it.`,
    );
    expect(contents()).toEqual({ [name]: "old" });
  },
);

test("a link that leads nowhere counts as existing", () => {
  fs.mkdirSync(folder, { recursive: true });
  fs.symlinkSync("nowhere", path.join(folder, "image.npy"));
  expect(() => new OutputSet({ folder, ...SET })).toThrow(UsageError);
});

test("a file that another run made meanwhile is not overwritten", async () => {
  const set = new OutputSet({ folder, ...SET });
  set.write("picture.png", "x");
  set.createNpy("image.npy", "<f4", [1]);
  await set.seal();
  fs.writeFileSync(path.join(folder, "image.npy"), "theirs");
  expect(() => set.commit("{}")).toThrow(UsageError);
  set.abort();
  expect(contents()).toEqual({ "image.npy": "theirs" });
});

describe("with force", () => {
  test("the old set stays until the commit, and is replaced whole", async () => {
    await writeSet("old");
    const set = new OutputSet({ folder, force: true, ...SET });
    set.write("picture.png", "new");
    set.createNpy("image.npy", "<f4", [1]);
    await set.seal();
    expect(contents()).toMatchObject({ "picture.png": "old", "image.json": '{"text":"old"}' });
    set.commit("{}");
    expect(contents()).toMatchObject({ "picture.png": "new", "image.json": "{}" });
    expect(Object.keys(contents())).toHaveLength(3);
  });

  test("abort leaves the old set as it was", async () => {
    await writeSet("old");
    const before = contents();
    const set = new OutputSet({ folder, force: true, ...SET });
    set.write("picture.png", "new");
    set.abort();
    expect(contents()).toEqual(before);
  });

  test("where a rename fails no sidecar stands, and what was renamed is taken back", async () => {
    await writeSet("old");
    const set = new OutputSet({ folder, force: true, ...SET });
    set.write("picture.png", "new");
    set.createNpy("image.npy", "<f4", [1]);
    await set.seal();
    // the second of the files cannot be renamed: its temporary file is gone
    fs.rmSync(path.join(folder, `.carillon-picture.png.${process.pid}.tmp`));
    expect(() => set.commit("{}")).toThrow(OutputError);
    set.abort();
    expect(contents()).toEqual({ "picture.png": "old" });
  });
});

test("the same arrays give the same payload hash, whatever the order of writing", async () => {
  const hashes = [];
  for (const order of [
    [0, 1, 2],
    [2, 0, 1],
  ]) {
    // biome-ignore format: two rows
    const set = new OutputSet({ folder, names: ["a.npy"] });
    const npy = set.createNpy("a.npy", "<c8", [3, 5]);
    for (const row of order) await npy.writeAt(5 * row, new Float32Array(10).fill(row));
    hashes.push((await set.seal())[0]?.payloadSha256);
    set.abort();
  }
  expect(hashes[0]).toMatch(/^[0-9a-f]{64}$/);
  expect(hashes[1]).toBe(hashes[0]);
});

test("a payload that spans several read pieces is hashed without its header", async () => {
  const count = 3 * 2 ** 19 + 7; // 12 MiB of float64 and a bit: more than two pieces of 4 MiB
  const values = Float64Array.from({ length: count }, (_, i) => i);
  const set = new OutputSet({ folder, names: ["a.npy"] });
  await set.createNpy("a.npy", "<f8", [count]).writeAt(0, values);
  const [record] = await set.seal();
  set.abort();
  expect(record?.payloadSha256).toBe(createHash("sha256").update(values).digest("hex"));
  expect(record?.payloadSha256).not.toBe(record?.sha256);
});

describe("misuse is our own fault, not an output error", () => {
  test.each([
    ["a name with a folder", { names: ["x/a.npy"] }, "not a plain file name"],
    ["a name twice", { names: ["a.npy", "a.npy"] }, "occurs twice"],
  ])("%s", (_, options, text) => {
    expect(() => new OutputSet({ folder, ...options })).toThrow(text);
    expect(fs.readdirSync(root)).toEqual([]);
  });

  test("a file that was not announced, not written or not sealed", async () => {
    const set = new OutputSet({ folder, names: ["a.npy"] });
    expect(() => set.write("b.npy", "")).toThrow("not announced");
    await expect(set.seal()).rejects.toThrow("never written");
    set.createNpy("a.npy", "<f4", [1]);
    expect(() => set.commit()).toThrow("never sealed");
    set.abort();
  });

  test("an abort during the seal ends it", async () => {
    const set = new OutputSet({ folder, names: ["a.npy"] });
    set.createNpy("a.npy", "<f4", [1]);
    const sealing = set.seal();
    set.abort();
    await expect(sealing).rejects.toThrow("aborted");
    expect(fs.readdirSync(root)).toEqual([]);
  });
});

test("an abort while a write is under way reaches no file that is opened afterwards", async () => {
  const set = new OutputSet({ folder, names: ["a.npy"] });
  const npy = set.createNpy("a.npy", "<f4", [4]);
  // four keep all threads of the pool busy, so that the write has not begun when the set is aborted
  const busy = Array.from({ length: 4 }, () => promisify(pbkdf2)("a", "b", 100000, 64, "sha512"));
  const written = npy.writeAt(0, new Float32Array(4).fill(7));
  set.abort();
  const other = path.join(root, "other");
  const descriptor = fs.openSync(other, "w");
  fs.writeSync(descriptor, "x".repeat(200));
  await Promise.allSettled([written, ...busy]);
  fs.closeSync(descriptor);
  expect(fs.readFileSync(other, "latin1")).toBe("x".repeat(200));
  expect(fs.readdirSync(root)).toEqual(["other"]);
});

describe("an output that cannot be written is an OutputError that names the file", () => {
  test("the folder's path leads through a file", () => {
    fs.writeFileSync(path.join(root, "a"), "");
    const make = () => new OutputSet({ folder, ...SET });
    expect(make).toThrow(OutputError);
    expect(make).toThrow(/a\/b.*not a folder/);
  });

  test("a folder stands where a file should", () => {
    fs.mkdirSync(path.join(folder, "image.npy"), { recursive: true });
    expect(() => new OutputSet({ folder, force: true, ...SET })).toThrow(/image\.npy: is a folder/);
  });

  test("a name that is too long", () => {
    const set = new OutputSet({ folder, names: ["n".repeat(250)] });
    expect(() => set.write("n".repeat(250), "")).toThrow(/has too long a name/);
    set.abort();
  });
});

describe("in a process of its own", () => {
  let bundleFolder = "";
  let bundle = "";
  beforeAll(() => {
    bundleFolder = fs.mkdtempSync(path.join(os.tmpdir(), "bundle-"));
    bundle = path.join(bundleFolder, "writers.mjs");
    const contents = `export * from "./src/writers/output-set.ts"`;
    buildSync({
      stdin: { contents, resolveDir: path.resolve(import.meta.dirname, "../..") },
      outfile: bundle,
      bundle: true,
      platform: "node",
      format: "esm",
    });
  });
  afterAll(() => fs.rmSync(bundleFolder, { recursive: true }));

  const script = (body: string) => `const { OutputSet } = await import(${JSON.stringify(bundle)});
    const set = new OutputSet({ folder: ${JSON.stringify(folder)}, names: ["a.npy", "b.npy"] });
    ${body}`;

  test("a file that outgrows the limit of the system ends as exit code 5, and abort leaves nothing", () => {
    const program =
      script(`try { set.createNpy("a.npy", "<f4", [1]); set.write("b.npy", Buffer.alloc(1 << 20)); }
      catch (fault) { console.log(fault.exitCode, fault.message); } finally { set.abort(); }`);
    const limited = 'ulimit -f 64; exec "$0" --input-type=module -e "$1"'; // files of at most 64 blocks
    const run = spawnSync("bash", ["-c", limited, process.execPath, program], { encoding: "utf8" });
    expect(run.stdout).toMatch(/^5 .*b\.npy: is larger than files may be here/);
    expect(fs.readdirSync(root)).toEqual([]);
  });

  test("leftovers of a killed run are removed by the next; those of a live run and of other outputs stay", async () => {
    const program = script(
      `set.createNpy("a.npy", "<f4", [1]); set.createNpy("b.npy", "<f4", [1]); console.log("ready"); setInterval(() => {}, 1000);`,
    );
    const child = spawn(process.execPath, ["--input-type=module", "-e", program]);
    await once(child.stdout, "data");
    const theirs = [`.carillon-a.npy.${child.pid}.tmp`, `.carillon-b.npy.${child.pid}.tmp`];
    new OutputSet({ folder, names: ["a.npy"] }).abort();
    expect(fs.readdirSync(folder).sort()).toEqual(theirs);

    child.kill("SIGKILL");
    await once(child, "exit");
    expect(fs.readdirSync(folder).sort()).toEqual(theirs);
    new OutputSet({ folder, names: ["a.npy"] }).abort();
    expect(fs.readdirSync(folder)).toEqual([theirs[1]]);
  });

  test("a leftover that bears our own process id is removed, but not what a live set of ours holds", () => {
    fs.mkdirSync(folder, { recursive: true });
    fs.writeFileSync(path.join(folder, `.carillon-a.npy.${process.pid}.tmp`), "of an earlier process");
    const set = new OutputSet({ folder, names: ["a.npy"] });
    set.write("a.npy", "mine");
    new OutputSet({ folder, names: ["a.npy"] }).abort();
    expect(contents()).toEqual({ [`.carillon-a.npy.${process.pid}.tmp`]: "mine" });
    set.abort();
  });
});
