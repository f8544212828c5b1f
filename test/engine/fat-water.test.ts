import { describe, test } from "vitest";
import { readNpy } from "../../src/writers/npy.js";
import { reconstructed } from "../support/reconstruct.js";

const FOLDER = "data/conformance";
const FILE = `${FOLDER}/fat-water-echoes.h5`;
const answer = (what: string) => readNpy(`${FOLDER}/fat-water-echoes.${what}.npy`).data as Float32Array;
function objectDifference(images: ArrayLike<number>, truth: Float32Array): number {
  const most = Math.max(...truth);
  let [difference, norm] = [0, 0];
  truth.forEach((value, i) => {
    if (value <= 0.2 * most) return;
    difference += (images[i]! - value) ** 2;
    norm += value ** 2;
  });
  return Math.sqrt(difference / norm);
}
describe("fat-water", () => {
  const water = answer("water-magnitude");
  const fat = answer("fat-magnitude");
  test.each([
    [["separate-fat-water=on"]],
    [["separate-fat-water=on", "trim-oversampling=off", "fit-matrix.readout-margin=keep"]],
    [["separate-fat-water.echo-phase=true"]],
    [["separate-fat-water.decay=true"]],
    [["separate-fat-water.fit=magnitude"]],
    [["separate-fat-water.spectrum=one-peak"]],
  ])("%s", async (settings) => {
    const done = await reconstructed(FILE, settings);
    const w = done.maps.get("water")!,
      f = done.maps.get("fat")!;
    let swapped = 0,
      object = 0;
    water.forEach((v, i) => {
      const t = Math.hypot(v, fat[i]!);
      if (t > 0.2 * Math.max(...water)) {
        object++;
        if (Math.abs(v - fat[i]!) > 0.5 * t && v > fat[i]! !== w[i]! > f[i]!) swapped++;
      }
    });
    console.log(
      settings.join(),
      done.plan.stages.at(-2)!.physics,
      objectDifference(w, water),
      objectDifference(f, fat),
      swapped,
      object,
      done.findings,
      done.plan.stages.at(-2)!.input.shape,
    );
  });
});
