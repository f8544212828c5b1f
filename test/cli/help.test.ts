import { copyFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, test } from "vitest";
import { COMMANDS } from "../../src/cli/commands.js";
import { STAGES } from "../../src/stages/registry.js";
import { writeRawFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("help");
const raw = path.join(folder, "raw.h5");
beforeAll(() => writeRawFile(raw));

const WIDTH = 80;

describe.concurrent("help, for a person at a terminal of 80 columns", () => {
  // The part that comes from the registry of stages is left out of what is pinned: it grows with every stage.
  test.for(["", ...COMMANDS.map(({ name }) => name)])(
    "of carillon %s is as it was read",
    async (name, { expect }) => {
      const { stdout } = await carillon(name ? [name, "--help"] : ["--help"]);
      const [pinned] = stdout.split("Stages, in the order of the flow:\n");
      await expect(pinned).toMatchFileSnapshot(`help/${name || "carillon"}.txt`);
      expect(stdout.split("\n").filter((line) => line.length > WIDTH)).toEqual([]);
    },
  );

  test("of recon and recipe names every stage with its keys", async ({ expect }) => {
    for (const name of ["recon", "recipe"]) {
      const text = (await carillon([name, "--help"])).stdout.replace(/\n {4,}/g, " ");
      for (const { id, schema } of STAGES) {
        const keys = Object.keys((schema as { properties?: object }).properties ?? {});
        const line = text.split("\n").find((each) => each.startsWith(`  ${id} `));
        expect(line).toBeDefined();
        if (keys.length) expect(line).toContain(`; keys: ${keys.join(", ")}`);
      }
    }
  });

  test("an incomplete command line shows the form of the command and examples, on stderr", async ({
    expect,
  }) => {
    const { stderr } = await carillon(["recon"]);
    expect(stderr).toBe(
      "error: RAW is missing. See: carillon recon --help\n\n" +
        "Usage: carillon recon RAW --out FOLDER [flags]\n\n" +
        "Examples:\n" +
        "  carillon recon scan.h5 --out result\n" +
        "      image.npy, image.png and image.json in result/\n" +
        "  carillon recon scan.h5 --out hann --set apodize.window=hann\n" +
        "      the same with a Hann window\n" +
        "  carillon recon scan.h5 --out straight --undisplace measured\n" +
        "      put back what the field displaced, measured from the echoes\n" +
        "  carillon recon scan.h5 --out parts --separate fat-water\n" +
        "      water.npy and fat.npy in their true places\n" +
        "  carillon recon scan.h5 --explain\n" +
        "      what would be done, and why\n",
    );
    const alone = await carillon([]);
    expect(alone.stderr).toBe(
      `error: no command given. See: carillon --help\n\n${(await carillon(["--help"])).stdout}`,
    );
    expect(alone.code).toBe(2);
  });

  test("the plan and the table of a file fit as well", async ({ expect }) => {
    for (const words of [
      ["inspect", "raw.h5"],
      ["recon", "raw.h5", "--explain"],
    ]) {
      const { code, stdout } = await carillon(words, { cwd: folder });
      expect(code).toBe(0);
      expect(stdout.split("\n").filter((line) => line.length > WIDTH)).toEqual([]);
    }
  });
});

describe.concurrent("flags, as people write them", () => {
  test("before or after the command, with = or a space, switched off, behind --", async ({ expect }) => {
    copyFileSync(raw, path.join(folder, "-odd name.h5"));
    const reference = (await carillon(["recon", raw, "--explain", "--grey-low", "-2.5e0"])).stdout;
    expect(reference).toContain("grey-low=-2.5 (flag)");
    for (const words of [
      ["--explain", "recon", "--grey-low=-2.5", raw],
      ["recon", "--explain=yes", "--grey-low", "-2.5", "--", raw],
    ])
      expect((await carillon(words)).stdout.split("\n").slice(2)).toEqual(reference.split("\n").slice(2));
    expect((await carillon(["inspect", "--no-json", "--", "-odd name.h5"], { cwd: folder })).stdout).toMatch(
      /^file +-odd name\.h5, group dataset\n/,
    );
    expect((await carillon(["inspect", raw, "--json=false"])).stdout).toMatch(/^file /);
    const turned = ["simulate", "--matrix", "16", "--out", path.join(folder, "turned.h5")];
    expect((await carillon([...turned, "--rotate-deg", "-10,0,20"])).code).toBe(0);
    expect((await carillon([...turned, "--force", "--rotate-deg", "10,20"])).stderr).toBe(
      "error: --rotate-deg is 10,20; must be three angles in degrees, with commas between. " +
        "For example: --rotate-deg=10,0,-20\n",
    );
  });

  test("what the simulator refuses is said about the flag that was given", async ({ expect }) => {
    for (const [flags, says] of [
      [["--noise", "-1"], "--noise is -1; must be 0 or greater."],
      [["--dwell-us", "0"], "--dwell-us is 0; must be greater than 0."],
      [["--oversampling", "0.5"], "--oversampling is 0.5; must be at least 1."],
      [
        ["--noise", "0", "--noise-readouts", "3"],
        "--noise-readouts is 3; must be 0 where there is no noise.",
      ],
      [
        ["--te-ms", "5", "--te-ms", "0.1"],
        "--te-ms is 0.1; must be at least 0.64 ms, the time from the first sample to k = 0. " +
          "Give a later echo time, a shorter dwell time or a partial echo.",
      ],
    ] as const)
      expect(await carillon(["simulate", "--out", path.join(folder, "no.h5"), ...flags])).toMatchObject({
        code: 2,
        stderr: `error: ${says}\n`,
      });
  });
});
