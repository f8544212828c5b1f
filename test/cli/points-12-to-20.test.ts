import { execFile } from "node:child_process";
import { closeSync, existsSync, openSync, readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { promisify } from "node:util";
import { beforeAll, describe, test } from "vitest";
import { changeReadout, writeRawFile } from "../support/raw-files.js";
import { BIN, carillon, scratchFolder } from "../support/run-carillon.js";

/** What a good command line does, point by point; each as a process, as its user meets it. */
const folder = scratchFolder("points");
const at = (name: string) => path.join(folder, name);
const raw = at("raw.h5");
const gaps = at("gaps.h5");
beforeAll(async () => {
  await writeRawFile(raw);
  await writeRawFile(gaps, { readouts: (all) => all.slice(0, -3) });
});

describe.concurrent("the twenty points of a good command line, 12 to 20", () => {
  test("12 and 13 without a terminal no escape byte and no carriage return; colour where it is asked for", async ({
    expect,
  }) => {
    const esc = "\u001b";
    for (const [flags, env] of [
      [[], {}],
      [["--no-color"], {}],
      [[], { NO_COLOR: "1" }],
      [[], { CARILLON_COLOR: "0" }],
    ] as const) {
      const { stdout, stderr } = await carillon(["recon", gaps, "--explain", ...flags], { env });
      expect(stderr).toContain("discrepancy");
      expect(stdout + stderr).not.toContain(esc);
      expect(stdout + stderr).not.toContain("\r");
    }
    const asked = await carillon(["recon", gaps, "--explain", "--color"]);
    expect(asked.stderr).toContain(`${esc}[33mdiscrepancy${esc}[0m`);
    expect(asked.stdout).not.toContain(esc);
  });

  test.skipIf(!existsSync("/usr/bin/script"))(
    "12 and 13 on a terminal: a bar and colour; NO_COLOR and --no-color leave the colour out (needs script)",
    async ({ expect }) => {
      const onTerminal = async (env: Record<string, string>, ...flags: string[]) => {
        const command = [process.execPath, BIN, "recon", gaps, "--explain", ...flags].join(" ");
        const { stdout } = await promisify(execFile)("script", ["-qec", command, "/dev/null"], {
          env: { PATH: process.env.PATH, ...env },
        });
        return stdout;
      };
      const plain = await onTerminal({});
      expect(plain).toMatch(/\rreading \[=+\] 100 %/);
      expect(plain).toContain("\u001b[33mdiscrepancy");
      expect(await onTerminal({ NO_COLOR: "1" })).not.toContain("\u001b");
      expect(await onTerminal({}, "--no-color")).not.toContain("\u001b");
    },
  );

  test("14 never prompts: with stdin open and outputs in the way it ends by itself", async ({ expect }) => {
    const out = at("prompt");
    await carillon(["recon", raw, "--out", out]);
    const { code, signal, stderr } = await carillon(["recon", raw, "--out", out, "--quiet"]);
    expect({ code, signal }).toEqual({ code: 2, signal: null });
    expect(stderr).toBe(`error: ${out}/image.npy: exists already. Add --force to replace it.\n`);
  });

  test("15 flag before environment before recipe before default, and --explain prints what was resolved", async ({
    expect,
  }) => {
    const recipe = at("grey.yaml");
    const stages = "stages: [inverse-fft, fit-matrix, combine-coils]";
    writeFileSync(recipe, `carillon: 1\n${stages}\noutputs: { grey-low: 1, grey-high: 90 }\n`);
    const plain = at("plain.yaml");
    writeFileSync(plain, `carillon: 1\n${stages}\n`);
    const greyLow = async (file: string, flags: string[], env: Record<string, string>) => {
      const words = ["recon", raw, "--explain", "--json", "--recipe", file, ...flags];
      const { outputs, settings } = JSON.parse((await carillon(words, { env })).stdout);
      return [outputs.greyLow, settings["grey-low"]];
    };
    const environment = { CARILLON_GREY_LOW: "2" };
    expect(await greyLow(recipe, ["--grey-low", "-3"], environment)).toEqual([
      -3,
      { value: -3, from: "flag" },
    ]);
    expect(await greyLow(recipe, [], environment)).toEqual([2, { value: 2, from: "CARILLON_GREY_LOW" }]);
    expect(await greyLow(recipe, [], {})).toEqual([1, { value: null, from: "default" }]);
    expect(await greyLow(plain, [], {})).toEqual([undefined, { value: null, from: "default" }]);
    const { stdout } = await carillon(["recon", raw, "--explain"], { env: environment });
    expect(stdout).toContain("settings: explain=true (flag), grey-low=2 (CARILLON_GREY_LOW)\n");
  });

  test("15 a flag that repeats the default still comes before the environment", async ({ expect }) => {
    const env = { CARILLON_SLICES: "3", CARILLON_MATRIX: "16", CARILLON_TE_MS: "4 8" };
    const words = ["simulate", "--out", at("slices.h5"), "--slices", "1", "--json"];
    const facts = JSON.parse((await carillon(words, { env })).stdout);
    expect(facts.slices).toHaveLength(1);
    expect(facts.imageReadouts).toBe(16 * 2); // 16 lines and two echoes, both from the environment
  });

  test("15 what the environment gives is checked like a flag, and named", async ({ expect }) => {
    for (const [name, value, rule] of [
      ["CARILLON_WORKERS", "many", "must be a whole number of at least 1"],
      ["CARILLON_FORCE", "maybe", "must be one of 1, true, yes, on, 0, false, no, off"],
      ["CARILLON_SAVE", "coils fase", "must be one of complex, coils, phase, real, imaginary"],
    ] as const) {
      const { code, stderr } = await carillon(["recon", raw, "--out", at("env")], { env: { [name]: value } });
      expect(code).toBe(2);
      expect(stderr).toMatch(new RegExp(`^error: ${name} is ${value.split(" ").at(-1)}; ${rule}\\.`));
    }
    const json = await carillon(["nonsense"], { env: { CARILLON_JSON: "1", CARILLON_UNRELATED: "x" } });
    expect(JSON.parse(json.stdout).error.exitCode).toBe(2);
  });

  test("16 no overwriting without --force, and nothing is touched before that is known", async ({
    expect,
  }) => {
    const out = at("force");
    await carillon(["recon", raw, "--out", out]);
    const before = readFileSync(path.join(out, "image.json"));
    const refused = await carillon(["recon", raw, "--out", out, "--set", "apodize=on", "--quiet"]);
    expect(refused.code).toBe(2);
    expect(readFileSync(path.join(out, "image.json"))).toEqual(before);
    const forced = await carillon(["recon", raw, "--out", out, "--set", "apodize=on", "--force"]);
    expect(forced.code).toBe(0);
    expect(readFileSync(path.join(out, "image.json"))).not.toEqual(before);
    const simulated = await carillon(["simulate", "--out", raw, "--quiet"]);
    expect(simulated.stderr).toBe(`error: ${raw}: exists already. Add --force to replace it.\n`);
    expect(simulated.code).toBe(2);
  });

  // 17, Ctrl-C, and the atomic part of 16: interrupt.test.ts

  test("18 a closed pipe is quiet", async ({ expect }) => {
    const shell = (text: string) =>
      promisify(execFile)("bash", ["-c", `set -o pipefail; ${text}`, process.execPath, BIN, raw]);
    // The reader is gone before the first byte; errors keep their exit code.
    const { stdout, stderr } = await shell('"$0" "$1" inspect "$2" --quiet | true; echo "$?"');
    expect({ stdout, stderr }).toEqual({ stdout: "0\n", stderr: "" });
    const failed = await shell('"$0" "$1" inspect "$2".missing --json | true; echo "$?"');
    expect(failed).toEqual({ stdout: "3\n", stderr: "" });
    const both = await shell('"$0" "$1" inspect "$2" 2>&1 | true; echo "$?"');
    expect(both).toEqual({ stdout: "0\n", stderr: "" });
  });

  test.skipIf(!existsSync("/dev/full"))(
    "18 a full disk behind stdout is no closed pipe: exit 5",
    async ({ expect }) => {
      const full = openSync("/dev/full", "w");
      const { code, stderr } = await carillon(["inspect", raw, "--quiet"], { stdout: full });
      closeSync(full);
      expect({ code, stderr }).toEqual({
        code: 5,
        stderr: "error: stdout: could not be written (ENOSPC).\n",
      });
    },
  );

  test("19 errors name file, place and next action; a stack only with --debug", async ({ expect }) => {
    const file = await writeRawFile(at("nan.h5"), {
      readouts: changeReadout(5, ({ samples }) => ({ samples: samples.with(9, Number.NaN) })),
    });
    const line =
      `error: ${file}: readout 5: channel 0, sample 4 is NaN; samples must be finite. ` +
      "The file is damaged or was exported wrongly: export it again\n";
    expect((await carillon(["inspect", file])).stderr).toBe(line);
    const { stderr } = await carillon(["inspect", file, "--debug"]);
    expect(stderr.startsWith(`${line}InputError: `)).toBe(true);
    expect(stderr).toMatch(/\n {4}at /);
  });

  // any number of workers: test/engine/run.test.ts
  test("20 the same output under any LANG, TZ and folder", async ({ expect }) => {
    const outputs = async (name: string, env: Record<string, string>, cwd?: string) => {
      const out = at(name);
      const said = [];
      for (const words of [
        ["inspect", gaps],
        ["recon", gaps, "--explain"],
        ["recon", gaps, "--out", out, "--save", "coils"],
        ["inspect", "missing.h5"],
        ["recon", "--help"],
      ]) {
        const { code, stdout, stderr } = await carillon(words, { env, ...(cwd && { cwd }) });
        said.push([code, stdout.replaceAll(out, "OUT"), stderr]);
      }
      const files = ["image.npy", "coil-images.npy", "image.png", "image.json"];
      return { said, files: files.map((file) => readFileSync(path.join(out, file))) };
    };
    const plain = await outputs("here", { LANG: "C", TZ: "UTC" });
    const german = {
      LANG: "de_DE.UTF-8",
      LC_ALL: "de_DE.UTF-8",
      LANGUAGE: "de",
      TZ: "Pacific/Chatham",
      COLUMNS: "200",
    };
    expect(await outputs("elsewhere", german, "/")).toEqual(plain);
  });
});
