import { mkdtempSync, rmSync } from "node:fs";
import { tmpdir } from "node:os";
import path from "node:path";
import { afterAll, describe, expect, test } from "vitest";
import { previewScan } from "../../src/engine/preview.js";
import { RawFile } from "../../src/ingest/raw-file.js";
import { DEFAULT_OVERRIDES } from "../../src/physics/scan.js";
import { type Changes, writeRawFile } from "../support/raw-files.js";
import { reconstructed } from "../support/reconstruct.js";

const folder = mkdtempSync(path.join(tmpdir(), "carillon-preview-"));
afterAll(() => rmSync(folder, { recursive: true }));

const SCAN = {
  matrix: { x: 16, y: 12 },
  coils: 2,
  slices: 2,
  averages: 2,
  noise: { sigma: 0.02, readouts: 4 },
};
const without = (limit: string) => (xml: string) =>
  xml.replace(new RegExp(`<${limit}>.*?</${limit}>`, "s"), "");

/** The same samples, told in other ways: the image must be the same, whether or not the header lets it be foreseen. */
const TOLD: [string, Changes][] = [
  ["the average limit is missing: every line comes once more than foreseen", { xml: without("average") }],
  ["the slice limit is missing: a slice comes that was not foreseen", { xml: without("slice") }],
  ["the line limits are missing: nothing can be foreseen", { xml: without("kspace_encoding_step_1") }],
  [
    "noise readouts stand in the middle: the whitening was foreseen from a part of them",
    { readouts: (all) => [...all.slice(0, 2), ...all.slice(4, 20), ...all.slice(2, 4), ...all.slice(20)] },
  ],
  ["noise readouts stand at the end", { readouts: (all) => [...all.slice(4), ...all.slice(0, 4)] }],
];

describe("a file that is not what its header lets expect is read again, and gives the same bits", () => {
  test.each(TOLD)("%s", async (_, changes) => {
    const plain = await reconstructed(
      await writeRawFile(path.join(folder, "plain.h5"), { acquisition: SCAN }),
    );
    const file = await writeRawFile(path.join(folder, "told.h5"), { acquisition: SCAN, ...changes });
    const told = await reconstructed(file, [], {}, { blockRows: 3 });
    expect(told.facts.lengths).toEqual(plain.facts.lengths);
    expect(told.coils).toEqual(plain.coils);
    expect(told.noise).toEqual(plain.noise);
  });
});

test("an ordinary file is foreseen", async () => {
  const raw = await RawFile.open(await writeRawFile(path.join(folder, "plain.h5"), { acquisition: SCAN }));
  const foreseen = previewScan(raw, DEFAULT_OVERRIDES, 3);
  raw.close();
  expect(foreseen).toMatchObject({ averages: 2, lengths: { slice: 2 }, channels: 2 });
  expect(foreseen?.noise?.readouts).toBe(4);
});
