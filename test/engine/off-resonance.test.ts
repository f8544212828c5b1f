import { describe, expect, test } from "vitest";
import { readNpy } from "../../src/writers/npy.js";
import { reconstructed } from "../support/reconstruct.js";

const FOLDER = "data/conformance";
const FILE = `${FOLDER}/off-resonance.h5`;
const answer = (what: string) => readNpy(`${FOLDER}/off-resonance.${what}.npy`).data as Float32Array;

/** What `recon --undisplace` inserts. */
const MARGIN = ["trim-oversampling=off", "fit-matrix.readout-margin=keep"];

/** Relative L2 of echo 0's magnitude over the object (above 20 % of the maximum), without fitting a scale. */
function objectDifference(images: ArrayLike<number>, truth: Float32Array, echo = 0): number {
  const most = Math.max(...truth);
  let [difference, norm] = [0, 0];
  truth.forEach((value, i) => {
    if (value <= 0.2 * most) return;
    difference += (images[echo * truth.length + i]! - value) ** 2;
    norm += value ** 2;
  });
  return Math.sqrt(difference / norm);
}

const magnitudes = (data: Float32Array, kind: "complex" | "real") =>
  kind === "real"
    ? data
    : Float32Array.from({ length: data.length / 2 }, (_, i) => Math.hypot(data[2 * i]!, data[2 * i + 1]!));

describe("off-resonance", () => {
  const truth = answer("undistorted-magnitude");
  const field = answer("field-hz");
  test("measured", async () => {
    const plain = await reconstructed(FILE);
    console.log("uncorrected", objectDifference(magnitudes(plain.result, plain.plan.result.kind), truth));
    const done = await reconstructed(FILE, [...MARGIN, "field-map=on", "undisplace=on"]);
    const image = magnitudes(done.result, done.plan.result.kind);
    console.log(
      done.plan.stages
        .map(({ stage, physics, output }) =>
          [stage.id, output.shape.join("x"), JSON.stringify(physics)].join(" "),
        )
        .join("\n"),
    );
    console.log(0, objectDifference(image, truth), 1, objectDifference(image, truth, 1), done.findings);
    const map = done.maps.get("field-hz")!;
    const errors = [...map]
      .map((hz, i) => Math.abs(hz - field[i]!))
      .filter((_, i) => truth[i]! > 0.2 * Math.max(...truth))
      .sort((a, b) => a - b);
    console.log(errors[errors.length >> 1], errors[Math.floor(errors.length * 0.95)]);
    const given = await reconstructed(FILE, [
      ...MARGIN,
      `undisplace.field=${FOLDER}/off-resonance.field-hz.npy`,
    ]);
    console.log("given", objectDifference(magnitudes(given.result, given.plan.result.kind), truth), [
      ...given.maps.keys(),
    ]);
  });
});
