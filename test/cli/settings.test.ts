import { existsSync, readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { PNG } from "pngjs";
import { beforeAll, describe, test } from "vitest";
import { STAGES } from "../../src/stages/registry.js";
import { readNpy } from "../../src/writers/npy.js";
import { writeRawFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("settings");
const at = (name: string) => path.join(folder, name);
const raw = at("raw.h5");
beforeAll(() => writeRawFile(raw));

/** The stages that would run, and how each is set. */
async function planned(...flags: string[]): Promise<[id: string, params: Record<string, unknown>][]> {
  const { stdout } = await carillon(["recon", raw, "--explain", "--json", ...flags]);
  return JSON.parse(stdout).plan.map((stage: { id: string; params: object }) => [stage.id, stage.params]);
}

describe.concurrent("--set", () => {
  test("adds a stage in its place, changes it, and takes it out", async ({ expect }) => {
    const ids = (stages: [string, unknown][]) => stages.map(([id]) => id);
    const standard = ["trim-oversampling", "prewhiten", "inverse-fft", "fit-matrix", "combine-coils"];
    expect(ids(await planned())).toEqual(standard);
    const windowed = await planned("--set", "apodize.window=tukey:0.5", "--set", "apodize.axes=[y]");
    expect(ids(windowed)).toEqual(standard.toSpliced(2, 0, "apodize"));
    expect(windowed[2]![1]).toMatchObject({ window: { name: "tukey" }, axes: ["y"] });
    expect(ids(await planned("--set", "prewhiten=off"))).toEqual(standard.toSpliced(1, 1));
    // Taking out what is not there does nothing.
    expect(ids(await planned("--set", "apodize=off"))).toEqual(standard);
  });

  test("what is wrong with it is said before the file is read", async ({ expect }) => {
    for (const [setting, says] of [
      ["apodise.window=hann", "--set: apodise: no such name. Did you mean apodize?"],
      [
        "polish=on",
        `--set: polish: no such name. Known: ${STAGES.map(({ id }) => id).join(", ")}, scan, outputs`,
      ],
      ["outputs.grey-hihg=3", "outputs.grey-hihg: unknown key. Did you mean grey-high? "],
      ["scan.centre=guess", "scan.centre is guess; must be one of header, measured."],
      ["apodize", "--set is apodize; must be of the form stage.parameter=value. "],
      ["apodize=maybe", "--set is apodize=maybe; a stage is switched on or off. "],
      ["outputs.png-bits=12", "outputs.png-bits is 12; must be one of 8, 16."],
    ] as const) {
      const { code, stderr } = await carillon([
        "recon",
        at("missing.h5"),
        "--out",
        at("x"),
        "--set",
        setting,
      ]);
      expect(stderr.startsWith(`error: ${says}`), stderr).toBe(true);
      expect(code).toBe(2);
    }
    for (const [setting, says] of [
      ["apodize.window=han", 'apodize.window is han; "han" is not a window. Choose one of none, hann, '],
      ["apodize.wndow=hann", "apodize.wndow: unknown key. Did you mean window? "],
    ] as const) {
      const { code, stderr } = await carillon(["recon", raw, "--out", at("x"), "--set", setting]);
      expect(stderr.startsWith(`error: ${says}`), stderr).toBe(true);
      expect(code).toBe(2);
      expect(existsSync(at("x"))).toBe(false);
    }
  });

  test("of a stage that occurs twice is an error", async ({ expect }) => {
    const recipe = at("twice.yaml");
    const stages = "[apodize: {window: hann}, apodize: {window: hamming}, inverse-fft, combine-coils]";
    writeFileSync(recipe, `carillon: 1\nstages: ${stages}\n`);
    const { code, stderr } = await carillon([
      "recon",
      raw,
      "--recipe",
      recipe,
      "--explain",
      "--set",
      "apodize=off",
    ]);
    expect(stderr).toBe(
      "error: --set is apodize=off; the recipe has apodize twice. Change the recipe file instead\n",
    );
    expect(code).toBe(2);
  });
});

describe.concurrent("a recipe file", () => {
  test("printed by recipe, it runs as the default one does", async ({ expect }) => {
    const recipe = at("default.yaml");
    writeFileSync(recipe, (await carillon(["recipe", raw])).stdout);
    await carillon(["recon", raw, "--out", at("by-default")]);
    const { code } = await carillon(["recon", raw, "--out", at("by-recipe"), "--recipe", recipe]);
    expect(code).toBe(0);
    expect(readFileSync(at("by-recipe/image.npy"))).toEqual(readFileSync(at("by-default/image.npy")));
  });

  test("what is wrong in it is one line with the file, the place and the nearest name; exit 2", async ({
    expect,
  }) => {
    const faults: Readonly<Record<string, readonly [text: string, says: string]>> = {
      "top key": ["carillon: 1\nstagse: []\n", "recipe: stagse: no such name. Did you mean stages?"],
      stage: [
        "carillon: 1\nstages: [inverse-fft, aposide]\n",
        "stages, entry 2: aposide: no such name. Did you mean apodize?",
      ],
      "key of a stage": [
        "carillon: 1\nstages:\n  - apodize: { windw: hann }\n",
        "apodize.windw: unknown key. Did you mean window? ",
      ],
      "key of scan": [
        "carillon: 1\nscan: { center: measured }\nstages: []\n",
        "scan.center: unknown key. Did you mean centre? ",
      ],
      version: ["carillon: 2\nstages: []\n", "carillon is 2; must be 1, the version of the recipe. "],
      "no version": ["stages: []\n", "carillon is null; must be 1, the version of the recipe. "],
      "no YAML": ["carillon: 1\nstages: [inverse-fft\nscan: {\n", "line "],
      "a list": ["- inverse-fft\n", "must be a map. Start from: carillon recipe RAW"],
      order: [
        "carillon: 1\nstages: [inverse-fft, apodize, combine-coils]\n",
        "stages: apodize: must come before inverse-fft. ",
      ],
      "no transform": ["carillon: 1\nstages: [combine-coils]\n", "stages: inverse-fft: must occur once, "],
    };
    for (const [name, [text, says]] of Object.entries(faults)) {
      const recipe = at(`${name}.yaml`);
      writeFileSync(recipe, text);
      const { code, stdout, stderr } = await carillon(["recon", raw, "--recipe", recipe, "--out", at("no")]);
      // What only the scan can tell is said without the file's name.
      const prefix = ["order", "no transform"].includes(name) ? "error: " : `error: ${recipe}: `;
      expect(stderr.startsWith(prefix + says), stderr).toBe(true);
      expect(stderr.trimEnd()).not.toContain("\n");
      expect({ code, stdout }).toEqual({ code: 2, stdout: "" });
    }
    expect((await carillon(["recon", raw, "--recipe", at("gone.yaml"), "--explain"])).stderr).toBe(
      `error: ${at("gone.yaml")}: the recipe cannot be read: ENOENT: no such file or directory. Check the path\n`,
    );
  });

  test.for(["radial", "spiral", "echo-planar"])(
    "cannot make a %s scan Cartesian: exit 3, with the default recipe or any other",
    async (name, { expect }) => {
      const file = `data/conformance/${name}.h5`;
      const recipe = at(`${name}.yaml`);
      writeFileSync(recipe, "carillon: 1\nstages: [inverse-fft, fit-matrix, combine-coils]\n");
      for (const flags of [[], ["--recipe", recipe], ["--explain"]]) {
        const words = ["recon", file, "--out", at(name), "--quiet", ...flags];
        const { code, stdout, stderr } = await carillon(words);
        expect(stderr).toMatch(
          /: header: trajectory is (radial|spiral|epi); only cartesian is supported so far\. /,
        );
        expect({ code, stdout }).toEqual({ code: 3, stdout: "" });
      }
      expect(existsSync(at(name))).toBe(false);
      expect((await carillon(["inspect", file])).code).toBe(0);
    },
  );
});

describe.concurrent("outputs", () => {
  test("--save: each array with its shape and type", async ({ expect }) => {
    const out = at("saves");
    const { code, stdout } = await carillon(["recon", raw, "--out", out, "--save", "coils", "--json"]);
    expect(code).toBe(0);
    expect(JSON.parse(stdout).files).toEqual(
      ["image.npy", "coil-images.npy", "image.png", "image.json"].map((name) => path.join(out, name)),
    );
    const coils = readNpy(path.join(out, "coil-images.npy"));
    expect([coils.dtype, coils.shape]).toEqual(["<c8", [2, 16, 16]]);
  });

  test("a root-sum-of-squares image has no phase, and the error says how to get one", async ({ expect }) => {
    for (const save of ["phase", "complex", "real", "imaginary"]) {
      const out = at(`no-${save}`);
      const { code, stderr } = await carillon(["recon", raw, "--out", out, "--save", save]);
      expect(stderr).toBe(
        `error: --save is ${save}; a root-sum-of-squares image of 2 channels is a magnitude without phase. ` +
          "Use --save coils: the complex images of the single channels have it\n",
      );
      expect(code).toBe(2);
      expect(existsSync(out)).toBe(false);
    }
  });

  test("one channel has a phase: every save is written", async ({ expect }) => {
    const single = await writeRawFile(at("single.h5"), { acquisition: { coils: 1 } });
    const saves = ["complex", "coils", "phase", "real", "imaginary"].flatMap((save) => ["--save", save]);
    const { code, stdout } = await carillon(["recon", single, "--out", at("single"), "--json", ...saves]);
    expect(code).toBe(0);
    const { files } = JSON.parse(stdout) as { files: string[] };
    expect(files.every((file) => existsSync(file))).toBe(true);
    expect(files.map((file) => path.basename(file))).toEqual([
      "image.npy",
      "image-complex.npy",
      "coil-images.npy",
      "image-phase.npy",
      "image-real.npy",
      "image-imaginary.npy",
      "image.png",
      "image-phase.png",
      "image-real.png",
      "image-imaginary.png",
      "image.json",
    ]);
  });

  test("--grey-low and --grey-high are the black and the white of the picture", async ({ expect }) => {
    const out = at("grey");
    await carillon(["recon", raw, "--out", out, "--grey-low", "10", "--grey-high", "20"]);
    const { pictures } = JSON.parse(readFileSync(path.join(out, "image.json"), "utf8"));
    expect(pictures[0]).toMatchObject({ black: 10, white: 20 });
    const { code, stderr } = await carillon([
      "recon",
      raw,
      "--out",
      at("inverted"),
      "--grey-low",
      "20",
      "--grey-high",
      "10",
    ]);
    expect(stderr).toBe("error: outputs.grey-high is 10; must be above grey-low, 20.\n");
    expect(code).toBe(2);
  });

  test("outputs.png-bits=16 gives a 16-bit grey picture", async ({ expect }) => {
    const out = at("deep");
    await carillon(["recon", raw, "--out", out, "--set", "outputs.png-bits=16"]);
    const png = readFileSync(path.join(out, "image.png"));
    // Bytes 24 and 25 of a PNG are bit depth and colour type (0: grey); published: PNG specification, section 11.2.2.
    expect([png[24], png[25]]).toEqual([16, 0]);
    expect(PNG.sync.read(png, { skipRescale: true }).depth).toBe(16);
  });

  test("outputs.pictures=false leaves the arrays and the sidecar", async ({ expect }) => {
    const flags = ["--set", "outputs.pictures=false", "--json"];
    const { stdout } = await carillon(["recon", raw, "--out", at("bare"), ...flags]);
    expect(JSON.parse(stdout).files).toEqual([at("bare/image.npy"), at("bare/image.json")]);
  });

  test("--strict fails on partial Fourier, exit 3, and says what to do", async ({ expect }) => {
    const partial = await writeRawFile(at("partial.h5"), { acquisition: { partialFourier: 0.75 } });
    const strict = await carillon(["recon", partial, "--out", at("strict"), "--strict", "--quiet"]);
    expect(strict.stderr).toMatch(
      new RegExp(
        `^error: ${partial}: partial Fourier along y: 75.0 % .*Leave out --strict to reconstruct all the same\n$`,
      ),
    );
    expect(strict.code).toBe(3);
    expect(existsSync(at("strict"))).toBe(false);
    const lenient = await carillon(["recon", partial, "--out", at("lenient")]);
    expect(lenient.code).toBe(0);
    expect(lenient.stderr).toContain("discrepancy: partial Fourier along y");
  });
});
