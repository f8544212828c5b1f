import { existsSync, readdirSync, readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, test } from "vitest";
import { settingsOf } from "../../src/cli/compare-variants.js";
import { npyBytes, readNpy } from "../../src/writers/npy.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("compare-cli");
const at = (...names: string[]) => path.join(folder, ...names);
const raw = at("bell.h5");
const WINDOWS = ["--vary", "apodize.window=none,hann,tukey:0.5"];

beforeAll(async () => {
  const made = await carillon([
    "simulate",
    "--out",
    raw,
    "--matrix",
    "96",
    "--slices",
    "2",
    "--noise-readouts",
    "32",
    "--quiet",
  ]);
  if (made.code !== 0) throw new Error(made.stderr);
});

const compare = (name: string, ...words: readonly string[]) =>
  carillon(["compare", raw, "--out", at(name), "--quiet", ...words]);
const json = (name: string) => JSON.parse(readFileSync(at(name, "compare.json"), "utf8"));

describe("compare", () => {
  test("writes tables, pictures, curves and the page, and says what matters in 80 columns", async ({
    expect,
  }) => {
    const { code, stdout, stderr } = await compare("windows", ...WINDOWS);
    expect(stderr).toBe("");
    expect(code).toBe(0);
    expect(readdirSync(at("windows")).sort()).toEqual([
      "compare.csv",
      "compare.html",
      "compare.json",
      "differences.png",
      "edge-profiles.png",
      "edge-profiles.svg",
      "images.png",
      "noise.npy",
      "noise.png",
      "point-spreads.png",
      "point-spreads.svg",
    ]);
    const table = stdout
      .split("\n")
      .filter((line) => !line.startsWith(at("windows")) && !line.includes("open "));
    expect(table.filter((line) => line.length > 80)).toEqual([]);
    expect(stdout).toContain("3 variants in one pass over the file");
    expect(stdout).toContain("For research only, not for diagnosis or treatment.");
    const csv = readFileSync(at("windows", "compare.csv"), "utf8").trimEnd().split("\r\n");
    expect(csv).toHaveLength(4);
    expect(csv[0]).toBe(
      `variant,${json("windows")
        .columns.map(({ id }: { id: string }) => id)
        .join(",")}`,
    );
    const { variants, reference, caution, input } = json("windows");
    expect(variants.map(({ name }: { name: string }) => name)).toEqual([
      "apodize.window=none",
      "apodize.window=hann",
      "apodize.window=tukey:0.5",
    ]);
    expect(reference).toBe("apodize.window=none");
    expect(caution).toContain("For research only");
    expect(input.sha256).toMatch(/^[0-9a-f]{64}$/);
    // noise of the windows by theory, two axes each: 0.375 and 0.6875 of the variance an axis (CHECKS: S3)
    const noise = variants.map(({ noise: { gain } }: { noise: { gain: number } }) => gain);
    expect(noise[1] / noise[0]).toBeCloseTo(0.375, 3);
    expect(noise[2] / noise[0]).toBeCloseTo(0.6875, 2);
    const maps = readNpy(at("windows", "noise.npy"));
    expect(maps.shape).toEqual([3, 96, 96]);
    // in the middle, where there is signal, the deviation is the noise itself
    const middle = (v: number) => Number(maps.data[(v * 96 + 48) * 96 + 48]);
    expect(middle(1) / middle(0)).toBeCloseTo(0.375, 2);
    // the recipe's text is one that can be run as it is
    writeFileSync(at("hann.yaml"), variants[1].recipeText);
    const again = await carillon([
      "recon",
      raw,
      "--out",
      at("again"),
      "--recipe",
      at("hann.yaml"),
      "--quiet",
    ]);
    expect(again.code).toBe(0);
    const page = readFileSync(at("windows", "compare.html"), "utf8");
    expect(page).not.toMatch(/(src|href)="(?!data:|#)/);
  });

  test("the same bytes for any number of workers and blocks, replicas too", async ({ expect }) => {
    const words = [...WINDOWS, "--noise-by", "replicas", "--replicas", "4", "--seed", "3"];
    expect((await compare("one", ...words, "--workers", "1")).code).toBe(0);
    expect((await compare("three", ...words, "--workers", "3", "--block", "7")).code).toBe(0);
    for (const name of readdirSync(at("one")).filter((each) => each !== "compare.json"))
      expect(readFileSync(at("three", name)), name).toEqual(readFileSync(at("one", name)));
    const withoutTimes = (name: string) => ({ ...json(name), runSeconds: undefined });
    expect(withoutTimes("three")).toEqual(withoutTimes("one"));
  });

  test("a grid of two stages in two passes, regions, an edge, another reference", async ({ expect }) => {
    writeFileSync(
      at("mask.npy"),
      npyBytes(
        "|u1",
        [96, 96],
        new Uint8Array(96 * 96).map((_, i) => (i % 96 > 40 ? 1 : 0)),
      ),
    );
    const { code, stdout } = await compare(
      "grid",
      ...["--vary", "prewhiten=on,off", "--vary", "apodize.window=none,hann"],
      ...["--reference", "prewhiten=on, apodize.window=hann", "--region", at("mask.npy")],
      ...["--noise-region", "rectangle:8,8,12,12px", "--edge", "x:48:24"],
    );
    expect(code).toBe(0);
    expect(stdout).toContain("4 variants in 2 passes over the file");
    const { reference, settings, variants } = json("grid");
    expect(reference).toBe("prewhiten=on, apodize.window=hann");
    expect(settings).toMatchObject({ edge: "x:48:24", "noise measured": "in rectangle:8,8,12,12px" });
    expect(variants[1].values).toMatchObject({ nrmse: 0, psnrDb: null });
    expect(variants[0].values.noiseMeasured).toBeGreaterThan(0);
  });

  test("recipes are compared as they are", async ({ expect }) => {
    writeFileSync(
      at("a.yaml"),
      "carillon: 1\nstages: [trim-oversampling, inverse-fft, fit-matrix, combine-coils]\n",
    );
    writeFileSync(
      at("b.yaml"),
      "carillon: 1\nstages:\n  - trim-oversampling\n  - apodize: { window: 'kaiser:6', shape: radial }\n  - inverse-fft\n  - fit-matrix\n  - combine-coils\n",
    );
    expect((await compare("recipes", "--recipe", at("a.yaml"), "--recipe", at("b.yaml"))).code).toBe(0);
    expect(json("recipes").variants.map(({ name }: { name: string }) => name)).toEqual(["a.yaml", "b.yaml"]);
  });

  test("what is wrong is said before anything is written", async ({ expect }) => {
    for (const [words, says] of [
      [[], "--vary: needs two variants or more"],
      [["--vary", "apodize.window"], "--vary is apodize.window; must be of the form STAGE.KEY=A,B"],
      [["--vary", "apodize.window=hann,hannn"], "apodize.window is hannn"],
      [["--vary", "apodize.window=hann,hann"], "--vary is apodize.window=hann; occurs twice"],
      [["--vary", "apodise.window=none,hann"], "--vary: apodise: no such name. Did you mean apodize?"],
      [["--vary", "scan.conjugate=true,false"], "how the file is read cannot vary"],
      [
        [
          ...WINDOWS,
          "--vary",
          "apodize.shape=separable,radial,elliptical",
          "--vary",
          "prewhiten=on,off",
          "--vary",
          "fit-matrix=on,off",
        ],
        "36 combinations; must be 24 or fewer",
      ],
      [[...WINDOWS, "--reference", "hann"], "--reference is hann; is none of the variants"],
      [[...WINDOWS, "--region", "circle:1,2,3,4"], "must be SHAPE:X,Y,WIDTH,HEIGHT or a mask"],
      [[...WINDOWS, "--region", "ellipse:900,0,3,3"], "holds no pixel"],
      [[...WINDOWS, "--edge", "z:1:2"], "--edge is z:1:2; must be AXIS:LINE:PX"],
      [[...WINDOWS, "--image", "7"], "--image is 7; there are 2 images, from 0"],
    ] as const) {
      const { code, stderr, stdout } = await compare("refused", ...words);
      expect(stderr, words.join(" ")).toContain(says);
      expect({ code, stdout }).toEqual({ code: 2, stdout: "" });
      expect(existsSync(at("refused"))).toBe(false);
    }
    expect((await compare("windows", ...WINDOWS)).stderr).toContain("exists already");
  });
});

test("commas in brackets and quotes do not part values", ({ expect }) => {
  expect(settingsOf("apodize.axes=[x,y],[x]")).toEqual(["apodize.axes=[x,y]", "apodize.axes=[x]"]);
  expect(settingsOf("apodize.window={name: hann},'a,b'")).toEqual([
    "apodize.window={name: hann}",
    "apodize.window='a,b'",
  ]);
});
