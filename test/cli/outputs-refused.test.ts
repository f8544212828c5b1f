import { execFileSync } from "node:child_process";
import { existsSync, mkdirSync, readdirSync, writeFileSync } from "node:fs";
import path from "node:path";
import { afterAll, beforeAll, describe, test } from "vitest";
import { writeLongFile, writeRawFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("refused");
const at = (name: string) => path.join(folder, name);
const raw = at("raw.h5");
const SMALL_DISK_BYTES = 64 * 1024;
const disk = at("disk");

/** A disk of 64 kB; only root may mount one, and not in every container. */
function mountSmallDisk(): boolean {
  mkdirSync(disk);
  try {
    execFileSync("mount", ["-t", "tmpfs", "-o", `size=${SMALL_DISK_BYTES}`, "tmpfs", disk], {
      stdio: "ignore",
    });
    return true;
  } catch {
    return false;
  }
}
const mounted = mountSmallDisk();
afterAll(() => {
  if (mounted) execFileSync("umount", [disk]);
});
beforeAll(() => writeRawFile(raw));

describe.concurrent("an output that cannot be written: exit 5, one line, nothing left", () => {
  test("the output folder is a file, or lies below one", async ({ expect }) => {
    const file = at("file");
    writeFileSync(file, "mine");
    for (const out of [file, path.join(file, "below"), path.join(file, "far", "below")]) {
      const { code, stdout, stderr } = await carillon(["recon", raw, "--out", out, "--quiet"]);
      expect(stderr).toMatch(
        new RegExp(`^error: ${file}\\S*: a part of its folder's path is not a folder\\. .*\n$`),
      );
      expect({ code, stdout }).toEqual({ code: 5, stdout: "" });
    }
    const simulated = await carillon(["simulate", "--out", path.join(file, "x.h5"), "--quiet"]);
    expect(simulated.stderr).toBe(
      `error: ${file}/x.h5: a part of its folder's path is not a folder. Choose another folder.\n`,
    );
    expect(simulated.code).toBe(5);
  });

  test.skipIf(!existsSync("/proc/self"))("a folder in which nothing can be made", async ({ expect }) => {
    for (const words of [
      ["recon", raw, "--out", "/proc/carillon"],
      ["simulate", "--out", "/proc/carillon/x.h5"],
    ]) {
      const { code, stdout, stderr } = await carillon([...words, "--quiet"]);
      expect(stderr).toMatch(/^error: \/proc\/carillon\S*: .*could not be written.*\n$/);
      expect({ code, stdout }).toEqual({ code: 5, stdout: "" });
    }
  });

  test("an output's name is a folder", async ({ expect }) => {
    mkdirSync(at("taken/image.npy"), { recursive: true });
    const { code, stderr } = await carillon(["recon", raw, "--out", at("taken"), "--force", "--quiet"]);
    expect(stderr).toBe(`error: ${at("taken/image.npy")}: is a folder. Choose another output name.\n`);
    expect(code).toBe(5);
    expect(readdirSync(at("taken"))).toEqual(["image.npy"]);
  });

  test.skipIf(!mounted)("a full disk (needs the right to mount one)", async ({ expect }) => {
    const big = await writeLongFile(at("big.h5"), 80); // 80 x 16 x 16 x 4 = 82 kB
    const recon = await carillon(["recon", big, "--out", path.join(disk, "out"), "--quiet"]);
    expect(recon.stderr).toBe(
      `error: ${disk}/out/image.npy: could not be written: the disk is full. ` +
        "Free some space or choose another folder.\n",
    );
    expect(recon.code).toBe(5);
    expect(readdirSync(disk)).toEqual([]);
    const simulate = await carillon(["simulate", "--out", path.join(disk, "x.h5"), "--quiet"]);
    expect(simulate.stderr).toMatch(
      /^error: \S+x\.h5: could not be written: [Nn]o space left on device\. .*\n$/,
    );
    expect(simulate.code).toBe(5);
    expect(readdirSync(disk)).toEqual([]);
  });
});

test("simulate makes the folders of its file", async ({ expect }) => {
  const file = at("new/folder/x.h5");
  expect(await carillon(["simulate", "--out", file, "--matrix", "16", "--quiet"])).toMatchObject({
    code: 0,
    stderr: "",
  });
  expect(existsSync(file)).toBe(true);
  // A wrong flag leaves none behind.
  const wrong = await carillon(["simulate", "--out", at("other/folder/x.h5"), "--partial-fourier", "3"]);
  expect(wrong).toMatchObject({ code: 2, stderr: "error: --partial-fourier is 3; must be from 0.5 to 1.\n" });
  expect(existsSync(at("other"))).toBe(false);
});
