import fs from "node:fs";
import os from "node:os";
import path from "node:path";
import { afterAll, expect, test } from "vitest";
import { makeFolder, removeFolders } from "../../src/writers/folder.js";

const root = fs.mkdtempSync(path.join(os.tmpdir(), "folder-"));
afterAll(() => fs.rmSync(root, { recursive: true }));
const at = (name: string) => path.join(root, name);

test("makes a folder with its parents and gives those that it made, deepest first", () => {
  expect(makeFolder(at("a/b/c"))).toEqual([at("a/b/c"), at("a/b"), at("a")]);
  expect(makeFolder(at("a/b/c"))).toEqual([]);
  expect(makeFolder(at("a/b/d"))).toEqual([at("a/b/d")]);
});

test("removes what it made, as far as it is empty", () => {
  const made = makeFolder(at("x/y/z"));
  fs.writeFileSync(at("x/mine"), "");
  removeFolders(made);
  expect(fs.readdirSync(at("x"))).toEqual(["mine"]);
});

test("a file in the way gives the system's error", () => {
  fs.writeFileSync(at("file"), "");
  fs.symlinkSync("nowhere", at("link"));
  expect(() => makeFolder(at("file"))).toThrow(/^EEXIST/);
  expect(() => makeFolder(at("file/below/further"))).toThrow(/^ENOTDIR/);
  expect(() => makeFolder(at("link"))).toThrow(/^EEXIST/);
});
