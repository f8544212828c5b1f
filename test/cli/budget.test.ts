import { readFileSync } from "node:fs";
import path from "node:path";
import { describe, test } from "vitest";
import { writeRawFile } from "../support/raw-files.js";
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
    expect(large.stderr).toContain("come in at the other side, at -80 and 80 mm");
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

  test("an echo time shorter than half a full echo needs a partial one, and is named", async ({ expect }) => {
    // 256 pixels at 130 Hz: 1 / 130 s in all, half of it before TE
    const words = ["budget", "--fov-mm", "220", "--matrix", "256", "--pixel-hz", "130"];
    const { stdout } = await carillon([...words, "--te-ms", "1", "--te-ms", "5"]);
    expect(stdout.replace(/\s+/g, " ")).toContain(
      "a full echo begins 3.846 ms before TE: TE 1 ms needs a partial one",
    );
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

describe.concurrent("budget, value by value", () => {
  test.each([
    [1.5, 63.866218e6],
    [3, 127.732435e6],
    [7, 298.042349e6],
  ])("%f T resonate at %f Hz [computed with SciPy's constants: S1]", async (fieldT, hz) => {
    const { plan } = await budget(...PLAN, "--pixel-hz", "200", "--field-t", `${fieldT}`);
    if (!(Math.abs(plan.resonanceHz / hz - 1) < 1e-8)) throw new Error(`${plan.resonanceHz}`); // 8 digits given
  });

  // All px of the table for -3.4 ppm, and the offset at -3.5 ppm; half a unit of the last digit
  test.each([
    // biome-ignore lint/suspicious/noApproximativeNumericConstant: a shift that happens to look like a logarithm
    [1.5, 223.532, [2.1715, 1.0857, 0.5559, 0.4343, 0.2171]],
    // biome-ignore lint/suspicious/noApproximativeNumericConstant: a shift that happens to look like a logarithm
    [3, 447.064, [4.3429, 2.1715, 1.1118, 0.8686, 0.4343]],
    [7, 1043.148, [10.1334, 5.0667, 2.5942, 2.0267, 1.0133]],
  ])("fat at %f T over bandwidths [computed with NumPy: S2]", async (fieldT, hzAt35, shifts) => {
    for (const [i, pixelHz] of [100, 200, 390.625, 500, 1000].entries()) {
      const words = [...PLAN, "--field-t", `${fieldT}`, "--pixel-hz", `${pixelHz}`];
      const { present } = await budget(...words);
      if (!(Math.abs(present.fatPixels + shifts[i]!) < 5.1e-5)) throw new Error(`${present.fatPixels}`);
    }
    const { fatHz } = await budget(...PLAN, "--field-t", `${fieldT}`, "--pixel-hz", "100", "--fat-ppm=-3.5");
    if (!(Math.abs(fatHz + hzAt35) < 5.1e-4)) throw new Error(`${fatHz}`);
  });

  test("echoes of both directions lie 2.2236 px apart at 3 T and 390.625 Hz per pixel [computed with NumPy: S2]", async ({
    expect,
  }) => {
    const train = ["--te-ms", "1.15", "--te-ms", "2.3", "--te-ms", "4.6", "--reversed-echoes", "odd"];
    const { echoes } = await budget(...AT_3T, "--pixel-hz", "390.625", ...train);
    expect(echoes.map(({ direction }: { direction: string }) => direction)).toEqual([
      "forward",
      "reverse",
      "forward",
    ]);
    // twice a value of 4 decimals: a unit of the last digit
    expect(Math.abs(echoes[1].fatPixels - echoes[0].fatPixels - 2.2236)).toBeLessThan(1.01e-4);
    expect(echoes[1].fieldErrorMm).toBe(-echoes[0].fieldErrorMm);
    // six-peak fat is never quite in phase: 5 decimals, half a unit
    for (const [i, magnitude] of [0.79871, 0.81892, 0.55947].entries())
      expect(Math.abs(echoes[i].fatSignal.magnitude - magnitude)).toBeLessThan(5.1e-6);
  });

  test.each([
    [3, 1.167],
    [1.5, 2.334],
  ])("six-peak fat at %f T is most opposed at %f ms [computed with NumPy: S2]", async (fieldT, ms) => {
    const { mostOpposedSixPeaks: most } = await budget(
      ...PLAN,
      "--field-t",
      `${fieldT}`,
      "--pixel-hz",
      "200",
    );
    // found on a grid of 0.1 us at 3 T, rounded to 1 us
    if (!(Math.abs(most.seconds * 1e3 - ms) < 5.1e-4)) throw new Error(`${most.seconds}`);
    if (!(Math.abs(most.real + 0.79802) < 5.1e-6)) throw new Error(`${most.real}`);
  });

  test("concomitant field of 10 mT/m, 100 mm along the field at 1.5 T: (0.01 x 0.1)^2 / (2 x 1.5) T [published: Bernstein 1998]", async ({
    expect,
  }) => {
    // 10 mT/m over an encoded 512 mm: gamma x 0.01 x 0.512 Hz in 512 samples
    const pixelHz = (42.577478461e6 * 0.01 * 0.512) / 512;
    const { present } = await budget(...PLAN, "--pixel-hz", `${pixelHz}`, "--field-t", "1.5");
    expect(present.gradientTPerM).toBeCloseTo(0.01, 12);
    expect(present.concomitantHz).toBeCloseTo(42.577478461e6 * (1e-6 / 3), 8);
    expect(present.concomitantPixels).toBeCloseTo(present.concomitantHz / pixelHz, 12);
    const near = await budget(...PLAN, "--pixel-hz", `${pixelHz}`, "--field-t", "3", "--isocentre-mm", "50");
    expect(near.present.concomitantHz).toBeCloseTo(present.concomitantHz / 8, 8);
  });

  test("the resonance frequency of a header counts, not its field [published: the example file of the standard]", async ({
    expect,
  }) => {
    const raw = await writeRawFile(at("example.h5"), {
      xml: (xml) =>
        xml
          .replace(/(systemFieldStrength_T>)[^<]*/, "$11.494")
          .replace(/(H1resonanceFrequency_Hz>)[^<]*/, "$163642459"),
    });
    const { plan, fatHz } = await budget(raw);
    expect(plan.fieldT).toBeCloseTo(1.494745, 6);
    expect(fatHz).toBeCloseTo(-3.4e-6 * 63642459, 9);
  });
});

describe.concurrent("budget of a raw file", () => {
  test("whose image is interpolated: shifts in its pixels, the blur that of the acquired ones", async ({
    expect,
  }) => {
    const options = { matrix: { x: 16, y: 16 } };
    const raw = await writeRawFile(at("interpolated.h5"), {
      acquisition: options,
      xml: (xml) => xml.replace(/(<reconSpace><matrixSize><x>)16/, "$164"),
    });
    const plain = await budget(await writeRawFile(at("plain.h5"), { acquisition: options }));
    const found = await budget(raw);
    expect(found.plan.pixels).toBe(64);
    expect(found.present.pixelBandwidthHz).toBeCloseTo(plain.present.pixelBandwidthHz / 4, 9);
    expect(found.present.fatMm).toBeCloseTo(plain.present.fatMm, 12);
    expect(found.present.blurMm).toBeCloseTo(plain.present.blurMm, 12);
    expect(found.present.blurPixels).toBeCloseTo(4 * 1.2067, 3);
    // Another field of view leaves the samples alone.
    expect((await budget(raw, "--fov-mm", "100")).plan.encodedSamples).toBe(found.plan.encodedSamples);
    const { stdout } = await carillon(["budget", raw, "--quiet"]);
    expect(stdout.replace(/\n +/g, " ")).toContain("Hz per acquired pixel of");
  });

  test("says the sign of each echo, in lines of both directions too", async ({ expect }) => {
    const train = (await carillon(["budget", "data/conformance/fat-water-echoes.h5", "--quiet"])).stdout;
    // the generator's: forward -1.737 px, reverse 1.737 px
    expect(train).toMatch(/^ +0 +2\.6 +forward +-1\.737 /m);
    expect(train).toMatch(/^ +1 +3\.38 +reverse +1\.737 /m);
    expect(train).toContain("on a forward readout");
    const planar = await budget("data/conformance/echo-planar.h5");
    expect(planar.readoutDirections).toEqual(["mixed"]);
    expect(planar.echoes[0].fatPixels).toBe(-planar.echoes[1].fatPixels);
    expect(planar.echoes[0].fatPixels).toBeLessThan(0);
    expect(planar.notes[0]).toContain("echo-planar");
    const reversed = await budget("data/conformance/echo-planar.h5", "--reversed-echoes", "all");
    expect(reversed.echoes.map(({ direction }: { direction: string }) => direction)).toEqual(["reverse"]);
  });

  test("is one of straight readouts", async ({ expect }) => {
    const { code, stderr } = await carillon(["budget", "data/conformance/spiral.h5", "--quiet"]);
    expect(stderr).toContain("header: trajectory is spiral; a budget is one of straight readouts");
    expect(code).toBe(3);
    expect((await budget("data/conformance/radial.h5")).notes[0]).toContain("blurs instead of displacing");
  });
});

describe.concurrent("what is impossible is refused with a mend that works", () => {
  const words = (text: string) => text.split(" ");
  // Numbers whose rounding to four digits goes either way.
  test.each([
    ["--fov-mm 220 --matrix 256 --pixel-hz 1700", 20],
    ["--fov-mm 201 --matrix 192 --bandwidth-khz 333", 13.7],
    ["--fov-mm 333 --matrix 320 --dwell-us 1.9 --oversampling 1.5", 17.3],
    ["--fov-mm 77 --matrix 100 --pixel-hz 777", 9.91],
  ])("gradient: %s at %f mT/m", async (plan, most) => {
    const limit = ["--max-gradient", `${most}`];
    const { code, stderr } = await carillon(["budget", ...words(plan), ...limit]);
    const [, hz, us, mm] =
      /at most (\S+) Hz per pixel \(a dwell time of (\S+) us\), .* view of (\S+) mm/.exec(stderr) ?? [];
    if (code !== 2) throw new Error(stderr);
    const geometry = words(plan).filter((_, i, all) => !/pixel-hz|khz|dwell/.test(all[i % 2 ? i - 1 : i]!));
    await budget(...geometry, ...limit, "--pixel-hz", hz!);
    await budget(...geometry, ...limit, "--dwell-us", us!);
    const wider = await budget(...words(plan.replace(/--fov-mm \S+/, `--fov-mm ${mm}`)), ...limit);
    if (!(wider.present.gradientTPerM > 0.998e-3 * most))
      throw new Error("the mend gives away more than rounding");
  });

  test("aliasing: an object of 280 mm in 256 mm; its ends land at -116 and 116 mm [computed with NumPy: S1]", async ({
    expect,
  }) => {
    const plan = ["--fov-mm", "256", "--matrix", "256", "--pixel-hz", "200"];
    const narrow = [...plan, "--oversampling", "1"];
    const { code, stderr } = await carillon(["budget", ...narrow, "--object-mm", "280"]);
    expect(stderr).toContain("its ends at 140 and -140 mm come in at the other side, at -116 and 116 mm");
    expect(code).toBe(2);
    const [, mm, factor] = /--fov-mm (\S+) or more, or --oversampling (\S+) or more/.exec(stderr) ?? [];
    await budget(...words(narrow.join(" ").replace("--fov-mm 256", `--fov-mm ${mm}`)), "--object-mm", "280");
    await budget(...plan, "--oversampling", factor!, "--object-mm", "280");
    const far = await carillon(["budget", ...narrow, "--object-mm", "600"]);
    expect(far.stderr).toContain("at 44 and -44 mm");
    // What fits exactly passes, but fat at its end does not.
    const { notes } = await budget(...narrow, "--object-mm", "256");
    expect(notes.join()).toContain("fat at the object's end comes in at the other side");
    expect((await budget(...plan, "--object-mm", "280")).notes.join()).toContain("its ends are cut off");
  });

  test("flags that make no plan; nothing is assumed in silence", async ({ expect }) => {
    for (const [flags, says] of [
      ["--sweep 1:Infinity:3", "must be two bandwidths per pixel"],
      ["--sweep 10:20", "must be two bandwidths per pixel"],
      ["--error-ppm 1 --error-hz 3", "--error-hz: says the same as --error-ppm"],
      ["--fat-ppm 0", "--fat-ppm is 0; must not be 0"],
      ["--te-ms -1", "--te-ms is -1; must not be below 0"],
      [`--csv ${at("one")} --svg ${at("one")}`, "is to hold two outputs. Give each a name of its own"],
    ] as const) {
      const { code, stderr } = await carillon(["budget", ...AT_3T, "--pixel-hz", "100", ...words(flags)]);
      expect(stderr).toContain(says);
      expect(code).toBe(2);
    }
    expect((await budget(...PLAN, "--pixel-hz", "100")).notes).toEqual(["assumed: 1.5 T, oversampling 2"]);
  });
});
