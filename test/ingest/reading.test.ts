import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, describe, expect, test } from "vitest";
import { readScan } from "../../src/engine/scan.js";
import { parseHeader } from "../../src/ingest/header.js";
import { simulateRaw } from "../../src/simulate/index.js";
import { encodedIndexOf } from "../support/placement.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";

const folder = mkdtempSync(path.join(tmpdir(), "carillon-reading-"));
afterAll(() => rmSync(folder, { recursive: true }));

async function simulated(
  name: string,
  options: Partial<Parameters<typeof simulateRaw>[0]> = {},
): Promise<string> {
  const file = path.join(folder, name);
  await simulateRaw({
    file,
    matrix: { x: 32, y: 30 },
    coils: 1,
    slices: 1,
    noise: { sigma: 0 },
    overwrite: true,
    ...options,
  });
  return file;
}

test("lines land at counter - centre + floor(N/2): the standard's worked example", () => {
  // published: header documentation of the standard; computed with Python (CHECKS section 13)
  expect([0, 28, 83].map((line) => encodedIndexOf(line, 28, 140))).toEqual([42, 70, 125]);
  expect([0, 20, 45].map((line) => encodedIndexOf(line, 20, 80))).toEqual([20, 40, 65]);
});

describe("what the recipe's scan may change", () => {
  test("conjugate: data of the other sense, conjugated, gives the same image", async () => {
    const { result } = await reconstructed(await simulated("plain.h5"));
    const turned = await reconstructed(await simulated("plain.h5"), [], { conjugate: true });
    // conj(S(k)) is the k-space of conj(rho(-r)): pixel (2 floor(N/2) - i) mod N
    const mirrored = new Float32Array(result.length);
    for (let y = 0; y < 30; y++)
      for (let x = 0; x < 32; x++) {
        const from = 2 * (((30 - y) % 30) * 32 + ((32 - x) % 32));
        mirrored[2 * (y * 32 + x)] = result[from]!;
        mirrored[2 * (y * 32 + x) + 1] = -result[from + 1]!;
      }
    // Column 0 has its mirror image in the part of the readout that the trim takes away.
    const inside = (values: Float32Array) => values.filter((_, i) => (i >> 1) % 32 > 0);
    expect(relativeDifference(inside(turned.result), inside(mirrored))).toBeLessThan(1e-6); // float32 transforms
  });

  test("alternate-sign moves the image by half its field of view along y", async () => {
    const file = await simulated("plain.h5");
    const { result } = await reconstructed(file);
    const turned = await reconstructed(file, [], { alternateSign: true });
    const moved = new Float32Array(result.length);
    // the line at k = 0 has counter 15: its sign changes too
    for (let y = 0; y < 30; y++)
      for (let i = 0; i < 64; i++) moved[((y + 15) % 30) * 64 + i] = -result[y * 64 + i]!;
    expect(relativeDifference(turned.result, moved)).toBeLessThan(1e-6);
    expect(turned.codes).not.toContain("alternating-sign");
  });

  test("recentre-mm: the point asked for becomes the centre", async () => {
    const file = await simulated("plain.h5", { fovMm: { x: 64, y: 60 } });
    const { result } = await reconstructed(file);
    const moved = await reconstructed(file, [], { recentreMm: [6, -4, 0] }); // 3 and -2 pixels of 2 mm
    const expected = new Float32Array(result.length);
    for (let y = 0; y < 30; y++)
      for (let x = 0; x < 32; x++)
        for (const part of [0, 1])
          expected[2 * (y * 32 + x) + part] = result[2 * (((y + 28) % 30) * 32 + ((x + 3) % 32)) + part]!;
    // the field of view is oversampled along x: what leaves it on one side does not come in on the other
    const inside = (values: Float32Array) => values.filter((_, i) => (i >> 1) % 32 < 28);
    expect(relativeDifference(inside(moved.result), inside(expected))).toBeLessThan(2e-2);
  });

  test("average-over: repetitions become one image, their noise lower", async () => {
    const file = await simulated("repeated.h5", { repetitions: 4, noise: { sigma: 0.05, readouts: 8 } });
    const { facts, noise } = await reconstructed(file, [], { averageOver: ["repetition"] });
    expect(facts.lengths.repetition).toBe(1);
    expect(noise.gain).toBeCloseTo(0.5, 12);
  });

  test("duplicates: the mean, or the last", async () => {
    const file = await simulated("averaged.h5", { averages: 2, noise: { sigma: 0.05, readouts: 4 } });
    const mean = await reconstructed(file);
    const last = await reconstructed(file, [], { duplicates: "last" });
    expect(mean.noise.gain).toBeCloseTo(Math.SQRT1_2, 12);
    expect(last.noise.gain).toBe(1);
    expect(relativeDifference(mean.result, last.result)).toBeGreaterThan(1e-3);
  });

  test("blocks of 1, 7 and 64 readouts give the same bits", async () => {
    const file = "data/conformance/asymmetric-echo.h5";
    const reference = await reconstructed(file);
    for (const blockRows of [1, 7, 64])
      expect((await reconstructed(file, [], {}, { blockRows })).coils).toEqual(reference.coils);
  });
});

describe("roles: what lands in the image", () => {
  test("embedded calibration lines do", async () => {
    const { facts, index, discrepancies } = await readScan("data/conformance/accelerated.h5");
    // every second of 96 lines, and 10 more among the 20 of calibration
    expect([...index.frames.values()][0]!.lines.size).toBe(58);
    expect(index.roles).toMatchObject({ image: 58, noise: 2 });
    expect(facts.calibrationMode).toBe("embedded");
    expect(discrepancies.map(({ code }) => code)).toContain("accelerated");
  });

  test("noise and phase-correction readouts do not", async () => {
    const { index } = await readScan("data/conformance/echo-planar.h5");
    expect(index.roles).toMatchObject({ image: 64, "phase-correction": 3 });
  });
});

describe("discrepancies", () => {
  test.each([
    ["partial-fourier", { partialFourier: 0.75 }, /partial Fourier along y: 76\.7 %/],
    ["partial-fourier", { partialEcho: 0.75 }, /partial Fourier along x: 75\.0 %/],
  ] as const)("%s", async (code, options, message) => {
    const { discrepancies } = await readScan(await simulated("short.h5", options));
    const found = discrepancies.find((entry) => entry.code === code);
    expect(found?.severity).toBe("problem");
    expect(found?.message).toMatch(message);
  });

  test("a whole scan has none", async () => {
    expect(
      (
        await readScan(
          await simulated("whole.h5", {
            noise: { sigma: 0.01, readouts: 4, relativeReceiverNoiseBandwidth: 0.8 },
          }),
        )
      ).discrepancies,
    ).toEqual([]);
  });
});

describe("the header", () => {
  const whole = `<ismrmrdHeader><experimentalConditions><H1resonanceFrequency_Hz>63870000</H1resonanceFrequency_Hz></experimentalConditions>
<encoding><encodedSpace><matrixSize><x>8</x><y>8</y><z>1</z></matrixSize><fieldOfView_mm><x>80</x><y>80</y><z>5</z></fieldOfView_mm></encodedSpace>
<reconSpace><matrixSize><x>8</x><y>8</y><z>1</z></matrixSize><fieldOfView_mm><x>80</x><y>80</y><z>5</z></fieldOfView_mm></reconSpace>
<encodingLimits/><trajectory>cartesian</trajectory></encoding></ismrmrdHeader>`;

  test("is read without what is optional", () => {
    expect(parseHeader(whole, "a.h5")).toMatchObject({
      resonanceHz: 63870000,
      fieldT: undefined,
      echoTimesSeconds: [],
    });
  });

  test.each([
    ["H1resonanceFrequency_Hz", "header/experimentalConditions/H1resonanceFrequency_Hz"],
    ["encodedSpace", "header/encoding 0/encodedSpace"],
    ["reconSpace", "header/encoding 0/reconSpace"],
    ["trajectory", "header/encoding 0/trajectory"],
    ["matrixSize", "header/encoding 0/encodedSpace/matrixSize"],
    ["y", "header/encoding 0/encodedSpace/matrixSize/y"],
  ])("without %s it names the place", (element, place) => {
    const text = whole.replace(new RegExp(`<${element}>.*?</${element}>`, "s"), "");
    expect(() => parseHeader(text, "a.h5")).toThrow(`a.h5: ${place}: is missing`);
  });

  test("simultaneous multi-slice is refused, naming the field", () => {
    const text = whole.replace(
      "<trajectory>",
      "<parallelImaging><multiband><multiband_factor>2</multiband_factor></multiband></parallelImaging><trajectory>",
    );
    expect(() => parseHeader(text, "a.h5")).toThrow(
      /multiband_factor is 2; simultaneous multi-slice is not supported/,
    );
  });

  test.each([
    ["<x>8</x>", "<x>0</x>", /matrixSize\/x is 0; must be a whole number of at least 1/],
    ["<x>80</x>", "<x>wide</x>", /fieldOfView_mm\/x is wide; must be a number/],
    ["<encoding>", "<encoding", /not well-formed XML/],
  ])("%s as %s is refused", (from, to, message) => {
    expect(() => parseHeader(whole.replace(from, to), "a.h5")).toThrow(message);
  });
});
