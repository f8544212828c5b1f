import { readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { describe, test } from "vitest";
import { npyBytes } from "../../src/writers/npy.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("taper");
const at = (name: string) => path.join(folder, name);

async function taper(...words: readonly string[]) {
  const { code, stdout, stderr } = await carillon(["taper", "--json", ...words]);
  if (code !== 0) throw new Error(stderr || stdout);
  return JSON.parse(stdout).windows;
}

/**
 * CG, <w^2>, ENBW, -3 dB, -6 dB, FWHM px, side lobe dB, flat SNR gain [computed with NumPy and SciPy: S3], tolerance
 * 2e-4 (side lobes 0.02 dB); and Harris 1978, Table 1 (from memory): CG, ENBW, -3 dB, -6 dB, PSL, within 4 % and 1 dB,
 * because two of its rows are that far from their own formulas.
 */
const TABLE: Readonly<Record<string, readonly [computed: readonly number[], harris?: readonly number[]]>> = {
  none: [
    [1, 1, 1, 0.8845, 1.205, 1.2067, -13.26, 1],
    [1, 1, 0.89, 1.21, -13],
  ],
  hann: [
    [0.5, 0.375, 1.5, 1.4382, 1.9968, 2, -31.47, 1.633],
    [0.5, 1.5, 1.44, 2, -32],
  ],
  hamming: [
    [0.54, 0.3974, 1.3628, 1.3008, 1.8123, 1.8152, -42.68, 1.5863],
    [0.54, 1.36, 1.3, 1.81, -43],
  ],
  blackman: [
    [0.42, 0.3046, 1.7268, 1.6409, 2.295, 2.2988, -58.11, 1.8119],
    [0.42, 1.73, 1.68, 2.35, -58],
  ],
  welch: [
    [0.6667, 0.53333, 1.2, 1.1535, 1.588, 1.5904, -21.29, 1.3693],
    [0.67, 1.2, 1.16, 1.59, -21],
  ],
  lanczos: [
    [0.5895, 0.45141, 1.299, 1.2494, 1.7278, 1.7305, -26.41, 1.4884],
    [0.59, 1.3, 1.26, 1.74, -26],
  ],
  "tukey:0.25": [
    [0.875, 0.84375, 1.102, 1.0058, 1.3713, 1.3733, -13.6, 1.0887],
    [0.88, 1.1, 1.01, 1.38, -14],
  ],
  "tukey:0.5": [
    [0.75, 0.6875, 1.2222, 1.1482, 1.5702, 1.5726, -15.12, 1.206],
    [0.75, 1.22, 1.15, 1.57, -15],
  ],
  "gaussian:0.4": [
    [0.4951, 0.35435, 1.4456, 1.3709, 1.9183, 1.9215, -43.25, 1.6799],
    [0.51, 1.39, 1.33, 1.86, -42],
  ],
  "kaiser:6.283185307179586": [
    [0.4892, 0.35809, 1.4963, 1.427, 1.9903, 1.9935, -45.85, 1.6711],
    [0.49, 1.5, 1.43, 1.99, -46],
  ],
  "kaiser:6": [[0.5, 0.36674, 1.4668, 1.3999, 1.9513, 1.9544, -43.79, 1.6513]],
  "fermi:1:0.078125": [[0.9458, 0.90679, 1.0136, 0.9259, 1.2627, 1.2645, -13.86, 1.0501]],
  "fermi:0.9:0.05": [[0.8937, 0.84961, 1.0639, 0.9799, 1.3367, 1.3387, -13.92, 1.0849]],
};

describe.concurrent("taper", () => {
  test("every row of the table, and Harris's", async ({ expect }) => {
    const names = Object.keys(TABLE);
    const found = await taper(names.join());
    for (const [i, name] of names.entries()) {
      const [[cg, square, enbw, width3, width6, fwhm, lobe, gain], harris] = TABLE[name]! as [
        number[],
        number[]?,
      ];
      const f = found[i];
      for (const [value, expected] of [
        [f.coherentGain, cg],
        [f.noiseFactor ** 2, square],
        [f.equivalentNoiseBandwidthBins, enbw],
        [f.width3DbPixels, width3],
        [f.width6DbPixels, width6],
        [f.pointFwhmPixels, fwhm],
        [f.flatSnrGain, gain],
      ])
        expect(Math.abs(value - expected!), name).toBeLessThan(2e-4);
      expect(Math.abs(f.highestSideLobeDb - lobe!), name).toBeLessThan(0.02);
      if (!harris) continue;
      [f.coherentGain, f.equivalentNoiseBandwidthBins, f.width3DbPixels, f.width6DbPixels].forEach(
        (value, j) => {
          expect(Math.abs(value / harris[j]! - 1), `${name}, Harris 1978`).toBeLessThan(0.045); // 4 %, of two digits
        },
      );
      expect(Math.abs(f.highestSideLobeDb - harris[4]!)).toBeLessThan(1.3);
    }
  });

  test("radial windows in 2-D: 1.41017, 2.1256, 1.9015, 1.4692 px, the disc's side lobe -17.57 dB [S3]", async ({
    expect,
  }) => {
    const found = await taper("none,hann,hamming,fermi:1:0.078125", "--shape", "radial");
    [1.41017, 2.1256, 1.9015, 1.4692].forEach((px, i) => {
      expect(Math.abs(found[i].pointFwhmPixels - px)).toBeLessThan(1e-4);
    });
    expect(Math.abs(found[0].highestSideLobeDb + 17.57)).toBeLessThan(0.02);
  });

  test("samples: the limit from 256 on, mm from the field of view or a raw file", async ({ expect }) => {
    const [limit] = await taper("hann");
    const [many] = await taper("hann", "--length", "256", "--fov-mm", "256");
    expect(Math.abs(many.pointFwhmPixels / limit.pointFwhmPixels - 1)).toBeLessThan(1e-3);
    expect(many.coherentGain).toBeCloseTo(0.5, 12); // 1 at k = 0 and periodic: [computed with NumPy: S3]
    expect(many.pointFwhmMm).toBeCloseTo(many.pointFwhmPixels, 9); // pixels of 1 mm
    const [own] = await taper("hann", "--raw", "data/conformance/off-resonance.h5");
    expect(own.pointFwhmMm / own.pointFwhmPixels).toBeCloseTo(2, 6); // of the case: 128 pixels over 256 mm
  });

  test("an asymmetric echo: the window's own share of gain and noise, the centre at k = 0", async ({
    expect,
  }) => {
    const [none] = await taper("none", "--raw", "data/conformance/asymmetric-echo.h5");
    expect(none.noiseFactor).toBeCloseTo(1, 9);
    expect(none.coherentGain).toBeCloseTo(1, 9);
    expect(none.pointFwhmPixels).toBeGreaterThan(1.2067); // fewer samples
  });

  test("a window of one's own, files, and what is refused", async ({ expect }) => {
    const hann = Float64Array.from({ length: 64 }, (_, i) => 0.5 + 0.5 * Math.cos((Math.PI * (i - 32)) / 32));
    writeFileSync(at("own.npy"), npyBytes("<f8", [64], hann));
    const [own, named] = [await taper(at("own.npy")), await taper("hann", "--length", "64")];
    expect(own[0].pointFwhmPixels).toBeCloseTo(named[0].pointFwhmPixels, 9);
    const words = ["taper", "hann,none", "--csv", at("w.csv"), "--svg", at("w.svg"), "--png", at("w.png")];
    const { stdout, code } = await carillon(words);
    expect(code).toBe(0);
    expect(stdout.split("\n").filter((line) => line.length > 80)).toEqual([]);
    expect(readFileSync(at("w.csv"), "utf8").split("\r\n")[0]).toMatch(/^window,coherentGain,/);
    expect(readFileSync(at("w.svg"), "utf8")).toContain("Point spread");
    expect((await carillon(words)).stderr).toContain("exists already");
    for (const [more, says] of [
      [["hannn"], "hannn"],
      [["tukey:2"], "alpha must be a number from 0 to 1"],
      [["hann", "--fov-mm", "200"], "--fov-mm is 200; needs the number of samples"],
      [[], "WINDOWS is missing"],
      [[at("own.npy"), "--shape", "radial"], "a window of samples has no radius"],
    ] as const) {
      const refused = await carillon(["taper", ...more]);
      expect(refused.stderr).toContain(says);
      expect(refused.code).toBe(2);
    }
    expect((await carillon(["taper", "--list"])).stdout).toContain("w(u) = 0.5 + 0.5 cos(pi u)");
  });
});
