import { readFileSync, writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { npyBytes, readNpy } from "../../src/writers/npy.js";
import { COMMITTED } from "../support/conformance-cases.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("placement");
const at = (...names: string[]) => path.join(folder, ...names);
const OFF_RESONANCE = `${COMMITTED}/off-resonance.h5`;

async function recon(name: string, raw: string, ...words: readonly string[]) {
  const { code, stdout, stderr } = await carillon(["recon", raw, "--out", at(name), "--quiet", ...words]);
  if (code !== 0) throw new Error(stderr);
  return { stdout, sidecar: JSON.parse(readFileSync(at(name, "image.json"), "utf8")) };
}

const floats = (...names: string[]) => readNpy(at(...names)).data as Float32Array;

describe("the placement statement", () => {
  test("says what is not corrected, and what each ppm would move", async () => {
    const { stdout, sidecar } = await recon("plain", OFF_RESONANCE);
    const { placement } = sidecar;
    expect(placement.bandwidthPerPixelHz.x).toBeCloseTo(120, 3); // the generator's
    expect(placement.bandwidthPerPixelHz.y).toBeNull();
    expect(placement.field).toBeNull();
    // 1 ppm in Hz, over 120 Hz per pixel of 2 mm
    expect(placement.perPpmMm).toBeCloseTo((sidecar.scan.resonanceHz * 1e-6 * 2) / 120, 4);
    expect(stdout).toContain("the field is not known: each ppm of it moves a pixel by");
    expect(stdout.replace(/\s+/g, " ")).toContain(
      "not included: gradient non-linearity, concomitant fields, eddy currents, displacement of the slice itself",
    );
  });

  test("says how far the field moved pixels, and what is left: the numbers of the maps", async () => {
    const { stdout, sidecar } = await recon("measured", OFF_RESONANCE, "--undisplace", "measured");
    const { field } = sidecar.placement;
    const mask = floats("measured", "field-mask.npy");
    const inside = (values: Float32Array) =>
      values
        .map(Math.abs)
        .filter((_, i) => mask[i])
        .sort();
    const moved = inside(floats("measured", "displacement-mm.npy"));
    expect(field.displacementBeforeMm.largest).toBeCloseTo(moved.at(-1)!, 6);
    expect(field.displacementBeforeMm.percentile95).toBeCloseTo(
      moved[Math.ceil(0.95 * moved.length) - 1]!,
      6,
    );
    expect(field.displacementBeforeMm.largest / 2).toBeCloseTo(2.5, 0); // the case: up to 2.5 pixels
    const hz = inside(floats("measured", "field-hz.npy"));
    expect(moved.at(-1)! / hz.at(-1)!).toBeCloseTo(2 / 120, 5);
    const errors = inside(floats("measured", "field-standard-error-hz.npy"));
    expect(field.standardErrorMm.largest).toBeCloseTo((errors.at(-1)! * 2) / 120, 6);
    expect(field).toMatchObject({ corrected: true, foldedPixels: 0, source: "measured: field-map" });
    expect(stdout).toContain("corrected");
  });

  test("two echoes: fat counts as field, by its phase between them, and noise does not say what remains", async () => {
    const { stdout, sidecar } = await recon("two", OFF_RESONANCE, "--undisplace", "measured");
    const { field } = sidecar.placement;
    // The six peaks' phase by hand, from the sidecar's echo times and resonance (shares and shifts: Hamilton 2011).
    const peaks = [
      [0.6, 0.047],
      [-0.5, 0.039],
      [-1.95, 0.006],
      [-2.6, 0.12],
      [-3.4, 0.7],
      [-3.8, 0.088],
    ] as const;
    const [first, second] = [0.006, 0.0082]; // the generator's
    const phaseAt = (seconds: number) => {
      const parts = peaks.map(([ppm, share]) => {
        const angle = -2 * Math.PI * ppm * 1e-6 * sidecar.scan.resonanceHz * seconds;
        return [share * Math.cos(angle), share * Math.sin(angle)] as const;
      });
      const [re, im] = [0, 1].map((k) => parts.reduce((sum, part) => sum + part[k]!, 0));
      return Math.atan2(im!, re!);
    };
    const turn = 1 / (second - first);
    const raw = -(phaseAt(second) - phaseAt(first)) / (2 * Math.PI * (second - first));
    const asHz = raw - turn * Math.round(raw / turn);
    expect(field.fatCountsAsHz).toBeCloseTo(asHz, 2);
    expect(field.fatCountsAsMm).toBeCloseTo((asHz * 2) / 120, 4);
    expect(field).toMatchObject({ fat: "counts as field", displacementAfterMm: null });
    expect(stdout.replace(/\s+/g, " ")).toContain("these echoes do not tell fat from water");
    const sure = ["--undisplace", "measured", "--set", "field-map.fat=absent"];
    const absent = await recon("absent", OFF_RESONANCE, ...sure);
    expect(absent.sidecar.placement.field).toMatchObject({ fat: "taken as absent", fatCountsAsHz: null });
    expect(absent.sidecar.placement.field.displacementAfterMm).toEqual(field.standardErrorMm);
    expect(absent.sidecar.placement.field.displacementAfterIs).toBe("standard error from noise alone");
    expect(field.displacementAfterIs).toBeNull();
  });

  test("a given map: its file and hash are kept, its error is not known", async () => {
    const map = `${COMMITTED}/off-resonance.field-hz.npy`;
    const { sidecar, stdout } = await recon("given", OFF_RESONANCE, "--undisplace", map);
    expect(sidecar.placement.field).toMatchObject({ source: `given: ${map}`, displacementAfterMm: null });
    expect(sidecar.inputArrays).toEqual([
      { file: map, shape: [128, 128], sha256: expect.stringMatching(/^[0-9a-f]{64}$/) },
    ]);
    expect(stdout).toContain("the error of the given map, which is not known here");
  });

  test("a whole turn that nothing tells is said, in Hz and mm", async () => {
    const { stdout, sidecar } = await recon("turn", OFF_RESONANCE, "--undisplace", "measured");
    // 2.2 ms between the generator's echoes: 454.5 Hz, over 120 Hz per pixel of 2 mm
    expect(sidecar.placement.field.sameButForHz).toBeCloseTo(1 / 0.0022, 2);
    expect(sidecar.placement.field.sameButForMm).toBeCloseTo((1 / 0.0022) * (2 / 120), 3);
    expect(stdout.replace(/\s+/g, " ")).toContain("nothing in these echoes tells a whole turn");
  });

  test("a given map of another matrix: that it was interpolated is said", async () => {
    writeFileSync(at("small.npy"), npyBytes("<f4", [32, 64], new Float32Array(32 * 64)));
    const { sidecar, stdout } = await recon("small", OFF_RESONANCE, "--undisplace", at("small.npy"));
    expect(sidecar.placement.field.interpolated).toBe("from 32 x 64 to 128 x 128 pixels");
    expect(stdout).toContain("the map was interpolated from 32 x 64 to 128 x 128 pixels");
  });

  test("a map that is not there is missed in the words of a raw file that is not", async () => {
    const missing = at("nowhere.npy");
    const { stderr } = await carillon(["recon", OFF_RESONANCE, "--out", at("x"), "--undisplace", missing]);
    expect(stderr).toContain(`error: ${missing}: no such file. Check the path`);
  });

  test("shift-readout moves everything, and the statement says so", async () => {
    const { sidecar } = await recon("shifted", OFF_RESONANCE, "--set", "shift-readout.offset=fat");
    expect(sidecar.placement.fat.mm).toBeCloseTo(0, 6);
    expect(sidecar.placement.shiftedMm).toBeCloseTo((-sidecar.placement.fat.offsetHz * 2) / 120, 3);
    expect(sidecar.placement.statement.join()).toContain("everything was moved by");
  });

  test("echoes that are all read backward show fat on the other side", async () => {
    const words = ["--matrix", "48", "--dwell-us", "20", "--te-ms", "3", "--quiet"];
    for (const which of ["none", "all"])
      await carillon(["simulate", "--out", at(`${which}.h5`), "--reversed-echoes", which, ...words]);
    const [forward, backward] = [await recon("fwd", at("none.h5")), await recon("bwd", at("all.h5"))];
    expect(backward.sidecar.placement.fat.mm).toBeCloseTo(-forward.sidecar.placement.fat.mm, 9);
    expect(backward.stdout).not.toContain("the other way");
    // The field moves pixels the other way as well.
    writeFileSync(at("up.npy"), npyBytes("<f4", [48, 48], new Float32Array(48 * 48).fill(10)));
    await recon("fwd-map", at("none.h5"), "--undisplace", at("up.npy"));
    await recon("bwd-map", at("all.h5"), "--undisplace", at("up.npy"));
    const [one, other] = ["fwd-map", "bwd-map"].map((name) => floats(name, "displacement-mm.npy")[0]!);
    expect(one).toBeGreaterThan(0);
    expect(other).toBeCloseTo(-one!, 9);
  });

  test("where a map folds, pixels are 0, counted and named", async () => {
    // A field of 1.25 pixels of displacement per pixel over a tenth of the rows: a fold.
    const steep = new Float32Array(128 * 128);
    for (let i = 0; i < steep.length; i++) steep[i] = 2 * 120 * Math.tanh(-((i % 128) - 60) * 0.8);
    writeFileSync(at("steep.npy"), npyBytes("<f4", [128, 128], steep));
    const { sidecar, stdout } = await recon("folded", OFF_RESONANCE, "--undisplace", at("steep.npy"));
    expect(sidecar.placement.field.foldedPixels).toBeGreaterThan(128);
    expect(stdout.replace(/\s+/g, " ")).toContain(
      "pixels of the object lie where the field folds: left at 0, nothing is invented there",
    );
    expect(floats("folded", "image.npy")[64 * 128 + 60]).toBe(0);
  });

  test("a map folds as many pixels of the object whether it is measured or given", async () => {
    // Two echoes read in turns at 98 Hz per pixel: oil counts as 220 Hz of field, which folds at its rims.
    const words = ["--te-ms", "6", "--te-ms", "8", "--dwell-us", "40", "--reversed-echoes", "odd", "--quiet"];
    await carillon(["simulate", "--out", at("oil.h5"), ...words]);
    const first = await recon("oil", at("oil.h5"), "--undisplace", "measured");
    // 0.1 rad over 2 ms is 7.96 Hz; at 97.7 Hz per pixel of 1.875 mm that is 0.153 mm
    expect(first.stdout.replace(/\s+/g, " ")).toContain(
      "counts as field, each 0.1 rad as 7.96 Hz, which is 0.153 mm (0.0815 px)",
    );
    const map = at("oil", "field-hz.npy");
    const second = await recon("oil-given", at("oil.h5"), "--undisplace", map);
    const [measured, given] = [first, second].map(({ sidecar }) => sidecar.placement.field.foldedPixels);
    expect(measured).toBeGreaterThan(50);
    expect(given).toBe(measured);
  });
});

describe("with more than one thread", () => {
  beforeAll(async () => {
    const words = ["--slices", "6", "--coils", "6", "--te-ms", "2.3", "--te-ms", "3.9", "--te-ms", "5.5"];
    const made = await carillon(
      [
        "simulate",
        "--out",
        at("many.h5"),
        ...words,
        "--dwell-us",
        "16",
        "--field-slope",
        "0.8,-0.4",
        "--quiet",
      ],
      { timeoutSeconds: 100 },
    );
    expect(made.code).toBe(0);
  }, 100_000);

  test("series stages give the same bits for 1 and 3 workers, and blocks of 7", async () => {
    const raw = at("many.h5");
    const words = ["--separate", "fat-water", "--undisplace", "measured"];
    const one = await recon("one", raw, ...words, "--workers", "1");
    for (const more of [
      ["--workers", "3"],
      ["--workers", "2", "--block", "7"],
    ]) {
      const other = await recon("other", raw, ...words, ...more, "--force");
      expect(other.sidecar.outputs).toEqual(one.sidecar.outputs);
    }
    const slices = await recon("slices", raw, "--undisplace", "measured", "--workers", "3");
    const alone = await recon("alone", raw, "--undisplace", "measured", "--workers", "1");
    expect(slices.sidecar.outputs).toEqual(alone.sidecar.outputs);
  }, 100_000);
});
