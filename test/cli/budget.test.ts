import { readFileSync } from "node:fs";
import path from "node:path";
import { describe, test } from "vitest";
import { concomitantOffsetHz } from "../../src/physics/concomitant-field.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("budget");
const at = (name: string) => path.join(folder, name);

async function budget(...words: readonly string[]) {
  const { code, stdout, stderr } = await carillon(["budget", "--json", ...words]);
  if (code !== 0) throw new Error(stderr || stdout);
  return JSON.parse(stdout);
}

const PLAN = ["--fov-mm", "256", "--matrix", "256"];
const AT_3T = [...PLAN, "--field-t", "3"];

describe.concurrent("budget", () => {
  test("10 us in 256 samples over 256 mm [computed with NumPy: S1]", async ({ expect }) => {
    const plain = await budget(...PLAN, "--oversampling", "1", "--dwell-us", "10");
    expect(plain.present.bandwidthHz).toBeCloseTo(100e3, 6);
    expect(plain.present.pixelBandwidthHz).toBeCloseTo(390.625, 9);
    expect(plain.present.durationSeconds).toBeCloseTo(2.56e-3, 12);
    expect(plain.present.gradientTPerM * 1e3).toBeCloseTo(9.174451, 6);
    const doubled = await budget(...PLAN, "--dwell-us", "5");
    expect(doubled.present.pixelBandwidthHz).toBeCloseTo(390.625, 9); // twice the samples, half the dwell time
    expect(doubled.plan.encodedSamples).toBe(512);
    expect(doubled.present.fatMm).toBeCloseTo(plain.present.fatMm, 9);
  });

  // px at these bandwidths for -3.4 ppm; the last digit of each is rounded
  test.each([
    // biome-ignore lint/suspicious/noApproximativeNumericConstant: times and shifts that happen to look like logarithms
    [1.5, 217.145, 2.3026, 4.6052, { 100: 2.1715, 200: 1.0857, 500: 0.4343 }],
    // biome-ignore lint/suspicious/noApproximativeNumericConstant: as above
    [3, 434.29, 1.1513, 2.3026, { 100: 4.3429, 390.625: 1.1118, 1000: 0.4343 }],
    [7, 1013.344, 0.4934, 0.9868, { 100: 10.1334, 500: 2.0267 }],
  ])(
    "fat at %f T: %f Hz, opposed at %f ms, in phase at %f ms [computed with NumPy: S2]",
    async (fieldT, hz, opposed, inPhase, shifts) => {
      for (const [pixelHz, px] of Object.entries(shifts)) {
        const words = [...PLAN, "--field-t", `${fieldT}`, "--pixel-hz", pixelHz, "--within", "0.25"];
        const found = await budget(...words);
        for (const [value, expected, rounding] of [
          [found.fatHz, -hz, 6e-4],
          [found.present.fatPixels, -px, 6e-5],
          [found.opposedPhaseSeconds[0] * 1e3, opposed, 6e-5],
          [found.inPhaseSeconds[0] * 1e3, inPhase, 6e-5],
          [found.smallestForFatHz, 4 * hz, 3e-3],
        ] as const)
          if (Math.abs(value - expected) > rounding) throw new Error(`${value} is not ${expected}`);
      }
    },
  );

  test("T2* widens the point spread: 1.2067, 1.2537, 1.4053 px at b = 0, 0.159, 0.318 [computed with NumPy: S2]", async ({
    expect,
  }) => {
    const words = [...AT_3T, "--pixel-hz", "390.625"];
    expect((await budget(...words)).present.blurPixels).toBeCloseTo(1.2067, 4);
    for (const [b, px] of [
      [1 / (2 * Math.PI), 1.2537],
      [1 / Math.PI, 1.4053],
    ] as const) {
      const t2StarMs = 1e3 / (2 * Math.PI * b * 390.625);
      const found = await budget(...words, "--t2star-ms", `${t2StarMs}`);
      expect(Math.abs(found.present.blurPixels - px)).toBeLessThan(1e-4);
    }
  });

  test("halving the bandwidth gains 1.41421 in SNR [computed with NumPy: S4]", async ({ expect }) => {
    const found = await budget(...AT_3T, "--pixel-hz", "400", "--sweep", "200:400:2");
    expect(found.sweep[0].relativeSnr).toBeCloseTo(Math.SQRT2, 9);
    expect(found.sweep[1].relativeSnr).toBeCloseTo(1, 9);
  });

  test("500 kHz need 293.582 mm at 40 mT/m [computed with NumPy: S1]; less is refused with the mend", async ({
    expect,
  }) => {
    const words = ["--matrix", "256", "--oversampling", "1", "--bandwidth-khz", "500"];
    const refused = await carillon(["budget", ...words, "--fov-mm", "200", "--max-gradient", "40"]);
    expect(refused).toMatchObject({ code: 2, stdout: "" });
    expect(refused.stderr).toContain("a field of view of 293.6 mm or more");
    const allowed = await carillon(["budget", ...words, "--fov-mm", "293.6", "--max-gradient", "40"]);
    expect(allowed.code).toBe(0);
    const large = await carillon(["budget", ...words, "--fov-mm", "200", "--object-mm", "240"]);
    expect(large.stderr).toContain("its ends come in at the other side");
    expect(large.code).toBe(2);
  });

  test("a raw file gives its own numbers, flags change single ones", async ({ expect }) => {
    const raw = "data/conformance/fat-water-echoes.h5";
    const own = await budget(raw);
    // the generator's: 250 Hz per pixel, the main peak at -434.29 Hz, -1.737 px
    expect(own.present.pixelBandwidthHz).toBeCloseTo(250, 4);
    expect(own.present.fatPixels).toBeCloseTo(-1.73716, 4);
    expect(own.readoutDirections).toEqual(["forward", "reverse", "forward"]);
    const wider = await budget(raw, "--pixel-hz", "500");
    expect(wider.present.fatPixels).toBeCloseTo(-1.73716 / 2, 4);
    expect(wider.plan.fovMm).toBe(own.plan.fovMm);
  });

  test("table, CSV, SVG and PNG; nothing is overwritten unasked", async ({ expect }) => {
    const files = ["--csv", at("b.csv"), "--svg", at("b.svg"), "--png", at("b.png")];
    const words = ["budget", ...AT_3T, "--pixel-hz", "200", ...files];
    const { stdout, code } = await carillon(words);
    expect(code).toBe(0);
    expect(stdout.split("\n").filter((line) => line.length > 80)).toEqual([]);
    expect(stdout).toContain("For research only, not for diagnosis or treatment.");
    const csv = readFileSync(at("b.csv"), "utf8").trimEnd().split("\r\n");
    expect(csv).toHaveLength(10);
    expect(csv[0]).toMatch(/^pixelBandwidthHz,bandwidthHz,dwellSeconds,/);
    expect(readFileSync(at("b.svg"), "utf8")).toContain(">bandwidth per pixel (Hz)<");
    const again = await carillon(words);
    expect(again).toMatchObject({ code: 2, stdout: "" });
    expect(again.stderr).toContain("exists already");
  });

  test("what is missing, said twice or no plan is refused", async ({ expect }) => {
    for (const [words, says] of [
      [[], "give RAW, or --fov-mm and --matrix"],
      [["--fov-mm", "200", "--matrix", "64"], "give RAW, or one of --pixel-hz"],
      [[...AT_3T, "--pixel-hz", "100", "--dwell-us", "5"], "--pixel-hz: says the same as --dwell-us"],
      [[...AT_3T, "--pixel-hz=-5"], "--pixel-hz is -5; must be above 0"],
      [[...AT_3T, "--pixel-hz", "100", "--sweep", "9:5:2"], "--sweep is 9:5:2; must be two bandwidths"],
    ] as const) {
      const { code, stderr } = await carillon(["budget", ...words]);
      expect(stderr).toContain(says);
      expect(code).toBe(2);
    }
  });
});

test("concomitant field: the lowest order of Bernstein et al. 1998, worked by hand", ({ expect }) => {
  // A transverse gradient of 10 mT/m, 0.1 m along the field at 1.5 T: (0.01 x 0.1)^2 / 3 T.
  expect(concomitantOffsetHz([0.01, 0, 0], [0, 0, 0.1], 1.5)).toBeCloseTo(42.577478461 / 3, 6);
  // A gradient along the field acts a quarter as much, across it; both together have a mixed term.
  expect(concomitantOffsetHz([0, 0, 0.01], [0.06, 0.08, 0], 1.5)).toBeCloseTo(42.577478461 / 12, 6);
  const mixed = 0.01 ** 2 * 0.05 ** 2 + (0.02 ** 2 * 0.05 ** 2) / 4 - 0.01 * 0.02 * 0.05 ** 2;
  expect(concomitantOffsetHz([0.01, 0, 0.02], [0.05, 0, 0.05], 3)).toBeCloseTo(
    (42.577478461e6 * mixed) / 6,
    6,
  );
});
