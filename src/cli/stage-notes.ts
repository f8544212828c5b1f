import type { Option } from "./command.js";
import { rows } from "./help.js";

/** `--set`, of every command that works a recipe out. */
export const SET_OPTION: Option = {
  type: "text",
  value: "STAGE.KEY=VALUE",
  repeatable: true,
  describe: "change the recipe; STAGE=off takes a stage out, STAGE=on puts it in its place",
};

/** The stages that a recipe may name, in the order of the flow, with their keys: help takes them from the registry. */
export async function stageNotes(): Promise<string> {
  const { STAGES } = await import("../stages/registry.js");
  const { scanSchema, outputsSchema } = await import("../recipe/schema.js");
  const keys = (schema: object) =>
    Object.keys((schema as { properties?: object }).properties ?? {}).join(", ");
  const stages = STAGES.map(({ id, summary, schema }): [string, string] => [
    id,
    keys(schema) ? `${summary}; keys: ${keys(schema)}` : summary,
  ]);
  return [
    "Stages, in the order of the flow:",
    ...rows(stages),
    "",
    "--set also takes, for the reading and the pictures:",
    ...rows([
      ["scan.KEY", keys(scanSchema)],
      ["outputs.KEY", keys(outputsSchema)],
    ]),
  ].join("\n");
}
