import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { simulateRaw } from "../../src/simulate/index.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const file = path.join(scratchFolder("margin"), "disc.h5");
beforeAll(() =>
  simulateRaw({
    file,
    phantom: "disc",
    matrix: { x: 60, y: 48 },
    fovMm: { x: 180, y: 180 },
    coils: 2,
    slices: 1,
  }),
);

describe("the readout's margin", () => {
  test("kept and taken off again, it changes nothing; in between the rows are as long as was encoded", async () => {
    const plain = await reconstructed(file);
    const kept = await reconstructed(file, [
      "trim-oversampling=off",
      "fit-matrix.readout-margin=keep",
      "trim-margin=on",
    ]);
    expect(kept.plan.stages.find(({ stage }) => stage.id === "fit-matrix")!.output.shape.at(-1)).toBe(120);
    expect(kept.plan.result).toMatchObject({
      shape: plain.plan.result.shape,
      fovMm: plain.plan.result.fovMm,
    });
    expect(relativeDifference(kept.result, plain.result)).toBeLessThan(1e-6); // the order of transforms
  });

  test("the pixel is that of the reconstructed matrix, where it is finer or coarser than the encoded one too", async () => {
    // conformance: 144 pixels of 240 / 144 mm from an encoded matrix of another size
    const settings = ["trim-oversampling=off", "fit-matrix.readout-margin=keep"];
    const plain = await reconstructed("data/conformance/oblique.h5");
    const wide = await reconstructed("data/conformance/oblique.h5", [...settings, "trim-margin=on"]);
    const pixel = ({ fovMm, shape }: typeof plain.plan.result) => fovMm.x / shape.at(-1)!;
    expect(pixel(wide.plan.coils)).toBeCloseTo(pixel(plain.plan.coils), 9);
    expect(wide.plan.result.shape).toEqual(plain.plan.result.shape);
    // The plain way limits the resolution after cropping, this one before: they differ at the edge of the field of view only.
    expect(relativeDifference(wide.result, plain.result)).toBeLessThan(0.02);
  });
});
