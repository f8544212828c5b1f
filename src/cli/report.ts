import path from "node:path";
import type { Flags } from "./command.js";
import type { Terminal } from "./terminal.js";
import { counted, wrap } from "./text.js";

type Written = Awaited<ReturnType<typeof import("../engine/write-reconstruction.js")["writeReconstruction"]>>;

/** Seconds by part, the largest first; parts of several threads add up, so the sum can exceed the time that passed. */
function timingTable(timings: Written["timings"]): string {
  const rows = Object.entries(timings).sort(([, a], [, b]) => b - a);
  return [
    "seconds by part, over all threads:",
    ...rows.map(([part, s]) => `  ${part.padEnd(20)}${s.toFixed(3)}`),
  ].join("\n");
}

/** What a reconstruction wrote and found, for a person and as JSON. */
export function report(written: Written, flags: Flags, terminal: Terminal): void {
  const { files, arrays, facts, placement, discrepancies, transform, timings } = written;
  terminal.discrepancies(discrepancies);
  terminal.document({ files, arrays, placement, scan: facts, discrepancies, transform, timings });
  if (transform === "plain")
    terminal.message("note: plain transforms ran, not the SIMD ones: slower, and not the same bits");
  for (const file of files) {
    const array = arrays.find((entry) => file.endsWith(`/${entry.file}`) || file === entry.file);
    terminal.result(array ? `${file}  [${array.axes.join(", ")}] = ${array.shape.join(" x ")}` : file);
  }
  const missing = facts.lines.missing
    ? `, ${facts.lines.missing} of ${facts.lines.expected} lines missing (zero)`
    : "";
  terminal.result(
    `${counted(facts.channels, "channel")}, ${counted(facts.slices, "slice")}, ` +
      `${counted(facts.echoes, "echo", "echoes")}${missing}`,
  );
  terminal.result("placement:");
  for (const sentence of placement.statement) terminal.result(wrap(`  ${sentence}`, 80, "    "));
  const problems = discrepancies.filter(({ severity }) => severity === "problem").length;
  if (problems)
    terminal.result(
      `${counted(problems, "discrepancy", "discrepancies")}: see ${path.basename(files.at(-1)!)}`,
    );
  terminal.result("For research only, not for diagnosis or treatment.");
  if (flags.timings) terminal.result(timingTable(timings));
}
