import { readdirSync } from "node:fs";
import { expect, test } from "vitest";
import { readScan } from "../../src/engine/scan.js";
import { decodeReadout } from "../../src/ingest/decode.js";
import { placeLine } from "../../src/ingest/place.js";
import { RawFile } from "../../src/ingest/raw-file.js";
import { readNpy } from "../../src/writers/npy.js";

/** One scan in every layout in which raw files occur, written with h5py by scripts/make-layouts.py. */
const FOLDER = "data/layouts";
const answer = readNpy(`${FOLDER}/k-space.npy`).data as Float32Array; // [coil, y, x]
const files = readdirSync(FOLDER).filter((name) => name.endsWith(".h5"));

test("all layouts are there", () => {
  expect(files.length).toBe(19);
});

test.each(files)("%s: every sample lands where it belongs", async (name) => {
  const file = `${FOLDER}/${name}`;
  const scan = await readScan(file);
  expect(scan.discrepancies).toEqual([]);
  const found = new Float32Array(answer.length);
  const raw = await RawFile.open(file);
  const line = new Float32Array(2 * 2 * 8);
  // Blocks of three: the last one is short.
  for (let first = 0; first < raw.readouts; first += 3)
    raw.readBlock(first, Math.min(3, raw.readouts - first), (block) => {
      block.heads.forEach((head, i) => {
        expect(head.dwellSeconds).toBeCloseTo(5e-6, 12);
        const { y } = placeLine(head, scan.facts, file);
        decodeReadout(block.samples(i), head, scan.facts, line, 0, file);
        for (let coil = 0; coil < 2; coil++)
          found.set(line.subarray(16 * coil, 16 * coil + 16), 16 * (8 * coil + y));
      });
    });
  raw.close();
  expect(found).toEqual(answer);
});
