import { expect, test } from "vitest";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";

const RAW = "data/conformance/multislice-noise.h5";

test("no window changes nothing; a radial one of that name still cuts k-space to a disc, and the plan says so", async () => {
  const bare = await reconstructed(RAW);
  const none = await reconstructed(RAW, ["apodize.window=none"]);
  expect(none.coils).toEqual(bare.coils);
  const disc = await reconstructed(RAW, ["apodize.window=none", "apodize.shape=radial"]);
  const planned = (of: typeof disc) =>
    of.plan.stages.find(({ stage }) => stage.id === "apodize")!.output.inImage;
  expect(planned(none)).toEqual(["x"]); // the trim left the readout in image space, and nothing needs its k-space
  expect(planned(disc)).toEqual([]);
  expect(relativeDifference(disc.coils, bare.coils)).toBeGreaterThan(1e-3);
  // a disc holds pi / 4 of its square: that share of the noise's variance is left, to the pixels along the rim (1 %)
  expect(Math.abs((disc.noise.gain / bare.noise.gain) ** 2 / (Math.PI / 4) - 1)).toBeLessThan(0.01);
});
