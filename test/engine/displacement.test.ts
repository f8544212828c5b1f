import { writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { readScan } from "../../src/engine/scan.js";
import { decodeReadout } from "../../src/ingest/decode.js";
import { isReversed, roleOf } from "../../src/ingest/flags.js";
import { RawFile } from "../../src/ingest/raw-file.js";
import { createPlainKernels } from "../../src/kernels/plain-kernels.js";
import type { ScanFacts } from "../../src/physics/scan.js";
import { withShortcuts } from "../../src/recipe/shortcuts.js";
import { type AcquisitionOptions, simulateRaw } from "../../src/simulate/index.js";
import { undisplace } from "../../src/stages/undisplace.js";
import { npyBytes } from "../../src/writers/npy.js";
import { answer, COMMITTED, magnitudes, objectDifference } from "../support/conformance-cases.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("displacement");
const at = (name: string) => path.join(folder, name);

/** Two echoes of a disc under a field of 20 Hz + 1.2 Hz/mm x - 0.5 Hz/mm y: exact k-space, hardly any noise. */
const SLOPED: AcquisitionOptions = {
  phantom: "disc",
  matrix: { x: 96, y: 96 },
  fovMm: { x: 240, y: 240 },
  coils: 3,
  slices: 1,
  echoTimesSeconds: [0.004, 0.006],
  dwellSeconds: 20e-6,
  offResonanceHz: 20,
  fieldSlopeHzPerMm: { x: 1.2, y: -0.5 },
  noise: { sigma: 0.002 },
};
const CASES: Readonly<Record<string, AcquisitionOptions>> = {
  forward: SLOPED,
  reversed: { ...SLOPED, reversedEchoes: "all" },
  alternating: { ...SLOPED, reversedEchoes: "odd" },
  "not oversampled": { ...SLOPED, readoutOversampling: 1, dwellSeconds: 40e-6 },
  still: { ...SLOPED, offResonanceHz: 0, fieldSlopeHzPerMm: { x: 0, y: 0 } },
};
beforeAll(async () => {
  for (const [name, options] of Object.entries(CASES))
    await simulateRaw({ ...options, file: at(`${name}.h5`) });
}, 60_000);

const corrected = (name: string) =>
  reconstructed(at(`${name}.h5`), ["prewhiten=off"], {}, {}, (recipe) =>
    withShortcuts(recipe, { undisplace: "measured" }),
  );
const truthHz = (i: number) => 20 + 1.2 * ((i % 96) - 48) * 2.5 - 0.5 * (Math.floor(i / 96) - 48) * 2.5;

describe("a field of known slope", () => {
  test.each(["forward", "reversed", "alternating", "not oversampled"])(
    "%s: the map is the field, in Hz and in the object's coordinates",
    async (name) => {
      const { maps } = await corrected(name);
      const [field, mask] = [maps.get("field-hz")!, maps.get("field-mask")!];
      const errors = field
        .map((hz, i) => Math.abs(hz - truthHz(i)))
        .filter((_, i) => mask[i])
        .sort();
      // Smoothing keeps a slope as it is; the ringing at the edge of the disc is what remains.
      expect(errors[errors.length >> 1]).toBeLessThan(0.2);
      expect(errors[Math.floor(0.95 * errors.length)]).toBeLessThan(1);
    },
  );

  test("displacement in mm is the same without oversampling, and the same number of Hz per pixel", async () => {
    const [double, single] = [await corrected("forward"), await corrected("not oversampled")];
    const [a, b] = [double.maps.get("displacement-mm")!, single.maps.get("displacement-mm")!];
    const mask = double.maps.get("field-mask")!.map((flag, i) => flag * single.maps.get("field-mask")![i]!);
    // 1.2 Hz/mm x 100 mm over 260 Hz per pixel of 2.5 mm is 1.15 mm; noise and edges leave a hundredth of it.
    a.forEach((mm, i) => void (mask[i] && expect(Math.abs(mm - b[i]!)).toBeLessThan(0.05)));
  });

  test.each(["forward", "reversed", "alternating", "not oversampled"])(
    "%s: the corrected echoes are those of the same scan without a field",
    async (name) => {
      const still = await reconstructed(at("still.h5"), ["prewhiten=off"]);
      const done = await corrected(name);
      const truth = magnitudes(still.result, still.plan.result.kind);
      const image = magnitudes(done.result, done.plan.result.kind);
      const size = truth.length / 2;
      for (const echo of [0, 1])
        expect(
          objectDifference(
            image.subarray(echo * size, (echo + 1) * size),
            truth.slice(echo * size, (echo + 1) * size),
          ),
        ).toBeLessThan(0.01);
    },
  );

  test("a constant field is a shift", async () => {
    writeFileSync(at("constant.npy"), npyBytes("<f4", [2, 2], new Float32Array(4).fill(130)));
    const moved = await reconstructed(at("still.h5"), ["prewhiten=off", "shift-readout.offset=130"]);
    const map = `undisplace.field=${at("constant.npy")}`;
    const mapped = await reconstructed(at("still.h5"), [
      "prewhiten=off",
      "trim-oversampling=off",
      "fit-matrix.readout-margin=keep",
      map,
    ]);
    // The interpolation kernel's error: see row-warp.ts.
    expect(relativeDifference(mapped.result, moved.result)).toBeLessThan(1e-3);
  });
});

/** Of the generator. */
const DELAY_SAMPLES = 1.3;
const ODD_PHASE = 0.6;

/**
 * An echo train read along x in turns, its delay and odd phase taken off here with the numbers of the generator; what is
 * left is the field's displacement along y.
 */
describe("echo-planar, along the phase direction", () => {
  test("a measured field, which is one along the readout, is refused", () => {
    expect(() => undisplace.parse({ along: "phase", "echo-spacing-ms": 0.6 })).toThrow(
      /For along: phase give a map/,
    );
    expect(() => undisplace.parse({ along: "phase", field: "a.npy" })).toThrow(/echo-spacing-ms: is needed/);
  });

  test("the given field puts the train's pixels back", async () => {
    const file = `${COMMITTED}/echo-planar.h5`;
    const { facts } = await readScan(file);
    const field = answer(COMMITTED, "echo-planar", "field-hz");
    const truth = answer(COMMITTED, "echo-planar", "undistorted-rss");
    const images = await trainImages(file, facts);
    const [rows, columns] = [facts.encoded.matrix.y, facts.reconstructed.matrix.x];
    const layout = {
      axes: ["coil", "z", "y", "x"] as const,
      shape: [facts.channels, 1, rows, columns],
      kind: "complex" as const,
      fovMm: facts.reconstructed.fovMm,
      inImage: ["x", "y", "z"] as const,
      acquired: facts.acquired,
    };
    const rss = (data: Float32Array) =>
      Float32Array.from({ length: rows * columns }, (_, i) => {
        let sum = 0;
        for (let c = 0; c < facts.channels; c++)
          sum += data[2 * (c * rows * columns + i)]! ** 2 + data[2 * (c * rows * columns + i) + 1]! ** 2;
        return Math.sqrt(sum);
      });
    const run = (order: "ascending" | "descending") => {
      const map = { file: "field.npy", shape: [rows, columns], data: field, sha256: "" };
      const params = undisplace.parse({
        field: "field.npy",
        along: "phase",
        "echo-spacing-ms": 0.6, // the generator's
        "line-order": order,
      });
      return undisplace.run(
        { data: images, layout, sampling: undefined, noise: { whitened: false, gain: 1 } },
        params,
        {
          scan: facts,
          kernels: createPlainKernels(),
          counters: { repetition: 0, set: 0, phase: 0, contrast: 0, slice: 0 },
          arrays: new Map([["field.npy", map]]),
          allocate: (floats) => new Float32Array(floats),
          release: () => undefined,
          emit: () => undefined,
          emitted: () => undefined,
          note: () => undefined,
        },
      ).data;
    };
    const before = objectDifference(rss(images), truth);
    const after = objectDifference(rss(run("ascending")), truth);
    const wrong = objectDifference(rss(run("descending")), truth);
    expect(before).toBeGreaterThan(0.15); // up to 3.6 pixels
    expect(wrong).toBeGreaterThan(before);
    expect(after).toBeLessThan(0.025); // noise, and the displacement along x that is left, a twentieth of a pixel
  });
});

/** Channel images [coil, y, x] of the train: lines in the order of rising k, put in phase, transformed, cropped. */
async function trainImages(file: string, facts: ScanFacts): Promise<Float32Array> {
  const { transform } = createPlainKernels();
  const { x: samples, y: lines } = facts.encoded.matrix;
  const { channels } = facts;
  const columns = facts.reconstructed.matrix.x;
  const frame = new Float32Array(2 * channels * lines * columns);
  const raw = await RawFile.open(file);
  raw.readBlock(0, raw.readouts, (block) => {
    block.heads.forEach((head, row) => {
      if (roleOf(head, undefined) !== "image") return;
      const line = new Float32Array(2 * channels * samples);
      decodeReadout(block.samples(row), head, facts, line, 0, file);
      transform.transformAxis({
        source: line,
        target: line,
        outer: channels,
        inner: 1,
        length: samples,
        inverse: true,
      });
      const backward = isReversed(head);
      for (let c = 0; c < channels; c++)
        for (let i = 0; i < columns; i++) {
          const from = 2 * (c * samples + samples / 2 - columns / 2 + i);
          const turn = (2 * Math.PI * DELAY_SAMPLES * (i - columns / 2)) / samples;
          const angle = backward ? turn - ODD_PHASE : -turn;
          const to = 2 * ((c * lines + head.counters.kspace_encode_step_1) * columns + i);
          frame[to] = line[from]! * Math.cos(angle) - line[from + 1]! * Math.sin(angle);
          frame[to + 1] = line[from]! * Math.sin(angle) + line[from + 1]! * Math.cos(angle);
        }
    });
  });
  raw.close();
  transform.transformAxis({
    source: frame,
    target: frame,
    outer: channels,
    inner: columns,
    length: lines,
    inverse: true,
  });
  return frame;
}
