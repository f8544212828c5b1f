import { existsSync, mkdirSync, readdirSync, readFileSync, rmSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, test } from "vitest";
import { RandomStream } from "../../src/kernels/random.js";
import { writeLongFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("interrupt");
const at = (name: string) => path.join(folder, name);
/** One that is done in half a second, and one that takes several: it is always interrupted in the middle. */
const raw = at("raw.h5");
const long = at("long.h5");
/** Readouts are read one at a time, so that small files take long. */
const SLOW = ["--block", "1"];
beforeAll(async () => {
  await writeLongFile(raw, 100);
  await writeLongFile(long, 1500);
});

const OUTPUTS = ["image.npy", "coil-images.npy", "image.png", "image.json"];

describe.concurrent("17 Ctrl-C: no partial files, exit 130 within two seconds", () => {
  test.for(["SIGINT", "SIGTERM"] as const)("recon, by %s", async (signal, { expect }) => {
    const out = at(`recon-${signal}/below`);
    // The helper kills a process that takes more than two seconds: it would have no exit code.
    const { code, stderr, stdout } = await carillon(["recon", long, "--out", out, ...SLOW], {
      interrupt: { signal, after: "reconstructing 25 %" },
    });
    expect(stderr).toMatch(/\nerror: interrupted; nothing was written\n$/);
    expect({ code, stdout }).toEqual({ code: 130, stdout: "" });
    expect(existsSync(path.dirname(out))).toBe(false);
  });

  test("recon into a folder that has other files keeps them", async ({ expect }) => {
    const out = at("kept");
    await carillon(["recon", raw, "--out", out, "--quiet"]);
    const before = readdirSync(out).map((name) => [name, readFileSync(path.join(out, name))]);
    const flags = ["--force", "--set", "apodize=on", ...SLOW];
    const { code } = await carillon(["recon", long, "--out", out, ...flags], {
      interrupt: { signal: "SIGINT", after: "reconstructing 25 %" },
    });
    expect(code).toBe(130);
    expect(readdirSync(out).map((name) => [name, readFileSync(path.join(out, name))])).toEqual(before);
  });

  test("inspect, with --json: the error is a document", async ({ expect }) => {
    const { code, stdout } = await carillon(["inspect", long, "--json"], {
      interrupt: { signal: "SIGINT", after: "reading 25 %" },
    });
    expect(JSON.parse(stdout).error).toEqual({
      message: "interrupted; nothing was written",
      exitCode: 130,
    });
    expect(code).toBe(130);
  });

  test("simulate", async ({ expect }) => {
    mkdirSync(at("simulate"));
    const file = at("simulate/new/folder/raw.h5");
    const { code, stderr } = await carillon(
      ["simulate", "--out", file, "--matrix", "128", "--slices", "12"],
      {
        interrupt: { signal: "SIGINT", after: "simulating" },
      },
    );
    expect(stderr).toMatch(/\nerror: interrupted; nothing was written\n$/);
    expect(code).toBe(130);
    expect(readdirSync(at("simulate"))).toEqual([]);
  });
});

describe.concurrent("5 exit 1: a fault of the program", () => {
  /** Loaded before the program: throws outside every promise, as a library's callback may. */
  const throwAfter = (milliseconds: number) =>
    `--import=data:text/javascript,setTimeout(()=>{throw(new(Error)('x'.repeat(1e6)))},${milliseconds})`;

  test("outside the command's own flow: one short line, and no partial files", async ({ expect }) => {
    const out = at("fault/below");
    const { code, stdout, stderr } = await carillon(["recon", long, "--out", out, "--quiet", ...SLOW], {
      env: { NODE_OPTIONS: throwAfter(600) },
    });
    expect(stderr).toMatch(
      /^error: a fault of this program: x{400,500}\.\.\.\nRun again with --debug to see where\.\n$/,
    );
    expect({ code, stdout }).toEqual({ code: 1, stdout: "" });
    expect(existsSync(path.dirname(out))).toBe(false);
  });
});

describe("16 atomic outputs", () => {
  test("killed at any moment: all of the set, or none; the next run finds nothing in its way", async ({
    expect,
  }) => {
    const random = RandomStream.fromSeed(17);
    const out = at("killed");
    const words = ["recon", raw, "--out", out, "--save", "coils", "--quiet", ...SLOW];
    let betweenRenames = 0;
    for (let i = 0; i < 8; i++) {
      const { signal } = await carillon(words, {
        interrupt: { signal: "SIGKILL", after: random.nextUint32() % 700 },
      });
      const there = existsSync(out) ? readdirSync(out).filter((name) => !name.startsWith(".")) : [];
      // They are renamed in this order, the sidecar last: where it is, the rest is.
      expect(there.sort()).toEqual(OUTPUTS.slice(0, there.length).sort());
      if (there.length > 0 && !there.includes("image.json")) {
        betweenRenames++;
        rmSync(out, { recursive: true });
      }
      if (signal === null) break; // it was done before the kill
    }
    // The renames take a fraction of a millisecond: more than one hit would mean that outputs grow under their names.
    expect(betweenRenames).toBeLessThan(2);
    expect((await carillon([...words, "--force"])).code).toBe(0);
    expect(readdirSync(out).sort()).toEqual([...OUTPUTS].sort());
  });
});
