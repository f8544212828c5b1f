import { readFileSync, rmSync, writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, expect, test } from "vitest";
import { RandomStream } from "../../src/kernels/random.js";
import { writeRawFile } from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("damaged");
const good = path.join(folder, "good.h5");
beforeAll(() => writeRawFile(good));

const FILES = 60;
const AT_A_TIME = 4;
const FLIPS = 8;
/** Structure and header lie in the first kilobytes of this file, samples behind: most flips shall hit the former. */
const STRUCTURE_BYTES = 8000;

/** Damaged copies, the same in every run: eight bits turned, in every second copy anywhere in the file. */
function damagedCopies(): Buffer[] {
  const random = RandomStream.fromSeed(60);
  const bytes = readFileSync(good);
  return Array.from({ length: FILES }, (_, i) => {
    const copy = Buffer.from(bytes);
    const range = i % 2 ? copy.length : STRUCTURE_BYTES;
    for (let flip = 0; flip < FLIPS; flip++) {
      const at = random.nextUint32() % range;
      copy[at] = copy[at]! ^ (1 << (random.nextUint32() % 8));
    }
    return copy;
  });
}

test("of 60 files with turned bits each is read or refused: no hang, no stack, no page of source", async () => {
  const waiting = [...damagedCopies().entries()];
  const codes: (number | null)[] = [];
  const lane = async () => {
    for (let next = waiting.shift(); next; next = waiting.shift()) {
      const [i, bytes] = next;
      const file = path.join(folder, `${i}.h5`);
      writeFileSync(file, bytes);
      const words = i % 3 ? ["inspect", file, "--quiet"] : ["recon", file, "--out", `${file}.out`, "--quiet"];
      const { code, signal, stderr } = await carillon(words, { timeoutSeconds: 20 });
      const outcome = `file ${i}: code ${code}, signal ${signal}, stderr ${stderr.slice(0, 600)}`;
      expect([0, 3], outcome).toContain(code);
      expect(stderr, outcome).toMatch(code === 0 ? /^$/ : /^error: .{1,500}\n$/);
      codes.push(code);
      rmSync(file);
    }
  };
  await Promise.all(Array.from({ length: AT_A_TIME }, lane));
  // Both kinds occur, so the files are neither all harmless nor all beyond recognition.
  expect(new Set(codes)).toEqual(new Set([0, 3]));
});
