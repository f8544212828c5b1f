import type { Plan } from "../engine/plan.js";
import { arrayShape } from "../engine/plan.js";
import { gridOf, mapProducts } from "../engine/products.js";
import type { Scan } from "../engine/scan.js";
import type { Flags, Origins } from "./command.js";
import { counted, wrap } from "./text.js";

/** The plan as text: each stage, its parameters, shape and bytes in and out, physics, and why it is there. */
export function explain(scan: Scan, plan: Plan, source: string, flags: Flags, origins: Origins): string {
  const given = Object.entries(origins).filter(([, from]) => from !== "default");
  const settings = given.map(([name, from]) => `${name}=${text(flags[name])} (${from})`);
  const lines = [
    `${scan.file}: recipe ${source}, ${counted(plan.stages.length, "stage")}, ` +
      `${counted(plan.groups, "group")} of ${counted(plan.framesPerGroup, "image")}`,
    wrap(`settings: ${settings.join(", ")}`, 80, "  "),
    "order of values: flag, environment (CARILLON_...), recipe, default",
  ];
  for (const { stage, params, input, output, physics, bytesIn, bytesOut, workBytes, reason } of plan.stages) {
    lines.push("", stage.id, wrap(`  why: ${reason}`, 80, "       "));
    const entries = Object.entries(params as object);
    if (entries.length)
      lines.push(wrap(`  parameters: ${entries.map(([k, v]) => `${k}=${text(v)}`).join(", ")}`, 80, "    "));
    lines.push(
      `  in:  [${input.axes.join(", ")}] = ${input.shape.join(" x ")} ${input.kind}, ${size(bytesIn)}`,
    );
    lines.push(
      `  out: [${output.axes.join(", ")}] = ${output.shape.join(" x ")} ${output.kind}, ${size(bytesOut)}`,
    );
    if (workBytes) lines.push(`  work memory: ${size(workBytes)}`);
    for (const [name, value] of Object.entries(physics)) lines.push(`  ${name}: ${value}`);
  }
  const { axes, shape } = arrayShape(scan.facts, plan.result);
  lines.push("", `image.npy: [${axes.join(", ")}] = ${shape.join(" x ")} float32`);
  for (const product of mapProducts(plan)) {
    const grid = gridOf(scan.facts, plan, product);
    const map = arrayShape(grid.facts, grid.layout);
    lines.push(
      wrap(
        `${product.stem}.npy: [${map.axes.join(", ")}] = ${map.shape.join(" x ")} float32, ${product.unit}: ${product.describe}`,
        80,
        "  ",
      ),
    );
  }
  return lines.join("\n");
}

function text(value: unknown): string {
  return typeof value === "object" ? JSON.stringify(value) : String(value);
}

function size(bytes: number): string {
  const units = ["B", "kB", "MB", "GB"];
  let value = bytes;
  let unit = 0;
  while (value >= 1000 && unit < units.length - 1) {
    value /= 1000;
    unit++;
  }
  return `${Number(value.toPrecision(3))} ${units[unit]}`;
}
