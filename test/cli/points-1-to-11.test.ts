import { readFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, test } from "vitest";
import { writeRawFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

/** What a good command line does, point by point; each as a process, as its user meets it. */
const folder = scratchFolder("points");
const at = (name: string) => path.join(folder, name);
const raw = at("raw.h5");
const gaps = at("gaps.h5");
beforeAll(async () => {
  await writeRawFile(raw);
  await writeRawFile(gaps, { readouts: (all) => all.slice(0, -3) });
});

const COMMANDS = ["inspect", "recon", "compare", "field-map", "budget", "taper", "recipe", "simulate"];
const version: string = JSON.parse(readFileSync("package.json", "utf8")).version;

describe.concurrent("the twenty points of a good command line, 1 to 11", () => {
  test("1 --help, -h, COMMAND --help: stdout, exit 0", async ({ expect }) => {
    const calls = [
      ["--help"],
      ["-h"],
      ["help"],
      ...COMMANDS.flatMap((c) => [
        [c, "--help"],
        ["help", c],
      ]),
    ];
    for (const words of [...calls, ["recon", "-h"], ["recon", raw, "--out", "--help"], ["--help", "recon"]]) {
      const { code, stdout, stderr } = await carillon(words);
      expect({ code, stderr }).toEqual({ code: 0, stderr: "" });
      expect(stdout).toMatch(/^Usage: carillon /);
    }
  });

  test("2 --version, bare", async ({ expect }) => {
    expect(await carillon(["--version"])).toMatchObject({ code: 0, stdout: `${version}\n`, stderr: "" });
  });

  test("3 and 4 results on stdout, messages and progress on stderr", async ({ expect }) => {
    const { code, stdout, stderr } = await carillon(["recon", gaps, "--out", at("streams")]);
    expect(code).toBe(0);
    expect(stdout.split("\n").slice(0, 3)).toEqual([
      `${at("streams/image.npy")}  [y, x] = 16 x 16`,
      at("streams/image.png"),
      at("streams/image.json"),
    ]);
    expect(stderr).toBe(
      "reconstructing 100 %\n" +
        "discrepancy: 3 of 16 lines not acquired (first: slice 0, line 13); they stay\n  zero\n",
    );
    expect((await carillon(["inspect", "missing.h5"])).stdout).toBe("");
  });

  test("5 exit codes: 0 done, 2 usage, 3 input, 5 output (1 is for faults of our own; 130: interrupt.test.ts)", async ({
    expect,
  }) => {
    const code = async (...words: string[]) => (await carillon(words)).code;
    expect(await code("inspect", raw)).toBe(0);
    expect(await code()).toBe(2);
    expect(await code("recon", raw)).toBe(2);
    expect(await code("inspect", at("missing.h5"))).toBe(3);
    expect(await code("recon", gaps, "--out", at("strict"), "--strict")).toBe(3);
    expect(await code("recon", raw, "--out", path.join(raw, "below-a-file"))).toBe(5);
  });

  test("6 an unknown flag or command: 2, with a suggestion", async ({ expect }) => {
    for (const [words, says] of [
      [["recon", raw, "--otu", "x"], "--otu: no such flag. Did you mean --out?"],
      [["recon", raw, "--grey_low=3"], "--grey_low: no such flag. Did you mean --grey-low?"],
      [["recon", raw, "-json"], "-json: no such flag. Did you mean --json?"],
      [["recon", raw, "-x"], "-x: no such flag. See: carillon recon --help"],
      [
        ["inspect", raw, "--force"],
        "--force: no such flag. It is a flag of recon, compare, field-map, budget, taper and simulate. See: carillon inspect --help",
      ],
      [["--verison"], "--verison: no such flag. Did you mean --version?"],
      [["recn", raw], "recn: no such command. Did you mean recon?"],
      [["paint"], `paint: no such command. Commands: ${COMMANDS.join(", ")}`],
      [["help", "recipes"], "recipes: no such command. Did you mean recipe?"],
    ] as const) {
      expect(await carillon(words)).toMatchObject({ code: 2, stdout: "", stderr: `error: ${says}\n` });
    }
  });

  test("7 a value that is no number: 2", async ({ expect }) => {
    for (const [flag, text, rule] of [
      ["--grey-low", "dark", "must be a number"],
      ["--grey-low", "1e", "must be a number"],
      ["--grey-low", "Infinity", "must be a number"],
      ["--workers", "1.5", "must be a whole number of at least 1"],
      ["--workers", "0", "must be a whole number of at least 1"],
      ["--encoding", "-1", "must be a whole number of at least 0"],
    ] as const)
      expect(await carillon(["recon", raw, "--out", at("numbers"), flag, text])).toMatchObject({
        code: 2,
        stderr: `error: ${flag} is ${text}; ${rule}.\n`,
      });
  });

  test("7 numbers in one word, of a flag that is repeated: 2", async ({ expect }) => {
    const words = ["simulate", "--out", at("list.h5")];
    const says = "is 2.3,3.9; must be a number.";
    expect(await carillon([...words, "--te-ms", "2.3,3.9"])).toMatchObject({
      code: 2,
      stderr: `error: --te-ms ${says} Repeat the flag: --te-ms 2.3 --te-ms 3.9\n`,
    });
    expect(await carillon(words, { env: { CARILLON_TE_MS: "2.3,3.9" } })).toMatchObject({
      code: 2,
      stderr: `error: CARILLON_TE_MS ${says} Put spaces between the numbers\n`,
    });
  });

  test("8 a missing or empty value or argument: 2", async ({ expect }) => {
    for (const [words, says] of [
      [["recon", raw, "--out"], "--out: needs a value. Write --out FOLDER; "],
      [["recon", raw, "--out", "--force"], "--out: needs a value. "],
      [["recon", raw, "--out", ""], '--out is ""; must not be empty. Write --out=FOLDER'],
      [["recon", raw, "--out=x", "--grey-low="], '--grey-low is ""; must not be empty. '],
      [["recon", raw], "--out: no folder to write into. Give one: --out FOLDER"],
      [["recon"], "RAW is missing. See: carillon recon --help"],
      [["recipe"], "RAW is missing. See: carillon recipe --help"],
      [["simulate"], "--out FILE is missing. See: carillon simulate --help"],
      [["inspect", ""], 'raw is ""; must not be empty. Give a path'],
      [["inspect", raw, "more"], "more: is one argument too many. Usage: carillon inspect RAW [flags]"],
    ] as const) {
      const { code, stdout, stderr } = await carillon(words);
      expect({ code, stdout }).toEqual({ code: 2, stdout: "" });
      expect(stderr.startsWith(`error: ${says}`), stderr).toBe(true);
    }
  });

  test("9 a repeated scalar is an error; lists may be repeated", async ({ expect }) => {
    for (const [flags, name] of [
      [["--out", "a", "--out", "a"], "--out"],
      [["--out=a", "--force", "--no-force"], "--force"],
      [["--out", "a", "--grey-high", "3", "--grey-high", "4"], "--grey-high"],
    ] as const)
      expect(await carillon(["recon", raw, ...flags])).toMatchObject({
        code: 2,
        stderr: `error: ${name}: is given more than once. Give it once\n`,
      });
    const lists = ["--set", "apodize=on", "--set", "prewhiten=off", "--explain", "--json"];
    const { recipe } = JSON.parse((await carillon(["recon", raw, ...lists])).stdout);
    expect(recipe.stages.map((stage: { id: string }) => stage.id)).toEqual([
      "trim-oversampling",
      "apodize",
      "inverse-fft",
      "fit-matrix",
      "combine-coils",
    ]);
  });

  test("10 --json: one document on stdout, errors included", async ({ expect }) => {
    const out = at("json");
    for (const words of [
      ["inspect", raw],
      ["recon", raw, "--explain"],
      ["recon", raw, "--out", out],
      ["recipe", raw],
      ["recipe", "--schema"],
      ["simulate", "--matrix", "16", "--out", at("json.h5")],
    ]) {
      const { code, stdout } = await carillon([...words, "--json"]);
      expect(code).toBe(0);
      expect(JSON.parse(stdout)).toBeTypeOf("object");
    }
    for (const [words, exitCode, field] of [
      [["recon", raw, "--out", out], 2, undefined], // exists already
      [["recon", raw, "--workers", "x"], 2, "--workers"],
      [["inspect", raw, "--nonsense"], 2, "--nonsense"],
      [["nonsense"], 2, "nonsense"],
      [[], 2, undefined],
      [["inspect", raw, "--group", "x"], 3, "group"],
      [["recon", raw, "--out", path.join(raw, "x")], 5, undefined],
    ] as const) {
      const { code, stdout, stderr } = await carillon([...words, "--json"]);
      const { error } = JSON.parse(stdout);
      expect(error).toMatchObject({ exitCode, message: expect.any(String), rule: expect.any(String) });
      expect(error.field).toBe(field);
      expect(code).toBe(exitCode);
      expect(stderr.replace("reconstructing 100 %\n", "")).toBe("");
    }
  });

  test("11 --quiet leaves stderr empty on success, and errors where they are", async ({ expect }) => {
    for (const words of [
      ["inspect", gaps],
      ["recon", gaps, "--out", at("quiet")],
      ["recipe", gaps],
      ["simulate", "--matrix", "16", "--out", at("quiet.h5")],
    ])
      expect(await carillon([...words, "--quiet"])).toMatchObject({ code: 0, stderr: "" });
    expect((await carillon(["inspect", "missing.h5", "--quiet"])).stderr).toMatch(/^error: /);
  });
});
