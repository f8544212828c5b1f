import { readFileSync } from "node:fs";
import { test } from "vitest";
import { carillon, scratchFolder } from "./support/run-carillon.js";

const folder = scratchFolder("readme");

/** The words of a line of shell without quotes or variables. */
const wordsOf = (line: string) => line.split(" #")[0]!.trim().split(/\s+/).slice(2);

test("every command of the README runs, in its order", async ({ expect }) => {
  const blocks = [...readFileSync("README.md", "utf8").matchAll(/```sh\n(.*?)```/gs)].map(
    ([, block]) => block!,
  );
  const lines = blocks
    .flatMap((block) => block.split("\n"))
    .filter((line) => line.startsWith("npx carillon "));
  expect(lines.length).toBeGreaterThan(8);
  for (const line of lines) {
    const { code, stderr } = await carillon(wordsOf(line), { cwd: folder });
    expect(code, `${line}\n${stderr}`).toBe(0);
  }
}, 60_000);
