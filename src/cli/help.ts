import { COMMON_OPTIONS, type Command, type Option } from "./command.js";
import { wrap } from "./text.js";

const WIDTH = 80;

export const CAUTION = "For research only, not for diagnosis or treatment.";

/** Help of the program: its commands, and the first three to try. */
export function programHelp(commands: readonly Command[]): string {
  return [
    "Usage: carillon COMMAND [flags]",
    "",
    "Raw MR k-space to images whose pixels can be trusted.",
    CAUTION,
    "",
    "Commands:",
    ...rows(commands.map(({ name, summary }) => [name, summary])),
    "",
    "To begin with:",
    "  carillon simulate --out bell.h5",
    "  carillon inspect bell.h5",
    "  carillon recon bell.h5 --out bell",
    "",
    "Flags:",
    ...rows([
      ["-h, --help", "show this help; carillon COMMAND --help shows that of a command"],
      ["--version", "show the version"],
    ]),
    "",
    wrap(
      "Exit codes: 0 done, 1 a fault of this program, 2 usage, 3 input, 4 partly done, " +
        "5 output could not be written, 130 interrupted.",
      WIDTH,
      "  ",
    ),
  ].join("\n");
}

/** What somebody needs whose command line is incomplete: the form of the command, and examples. */
export function briefHelp(command: Command): string {
  return [`Usage: carillon ${command.name} ${command.usage}`, "", ...exampleLines(command)].join("\n");
}

/** Help of one command. */
export async function commandHelp(command: Command): Promise<string> {
  const { summary, options, notes } = command;
  const lines = [
    `Usage: carillon ${command.name} ${command.usage}`,
    "",
    `${summary[0]!.toUpperCase()}${summary.slice(1)}.`,
  ];
  if (command.arguments.length)
    lines.push("", "Arguments:", ...rows(command.arguments.map((a) => [a.name.toUpperCase(), a.describe])));
  lines.push("", "Flags:", ...optionRows(options));
  lines.push("", "Flags of every command:", ...optionRows(COMMON_OPTIONS));
  lines.push(...rows([["-h, --help", "show this help"]]));
  lines.push("", ...exampleLines(command));
  if (notes) lines.push("", await notes());
  lines.push(
    "",
    wrap(
      "Any flag can come from the environment: CARILLON_JSON=1, CARILLON_OUT=FOLDER, a list with spaces between. " +
        "A flag on the command line comes first, then the environment, then a recipe, then the default.",
      WIDTH,
      "",
    ),
  );
  return lines.join("\n");
}

function exampleLines({ examples }: Command): string[] {
  return ["Examples:", ...examples.flatMap(([example, text]) => [`  carillon ${example}`, `      ${text}`])];
}

function optionRows(options: Readonly<Record<string, Option>>): string[] {
  const shown = Object.entries(options).filter(([, { hidden }]) => !hidden);
  return rows(
    shown.map(([name, option]) => {
      const notes = [option.describe];
      if (option.choices) notes.push(`: ${option.choices.join(", ")}`);
      if (option.repeatable) notes.push("; repeatable");
      if (option.required) notes.push(" (required)");
      const byDefault = option.byDefault ?? option.fallback;
      if (byDefault !== undefined) notes.push(` (default: ${byDefault})`);
      return [option.value ? `--${name} ${option.value}` : `--${name}`, notes.join("")];
    }),
  );
}

/** Names in one column, what they mean beside them. */
export function rows(entries: readonly (readonly [string, string])[]): string[] {
  const column = Math.max(...entries.map(([name]) => name.length)) + 4;
  return entries.map(([name, text]) => wrap(`  ${name}`.padEnd(column) + text, WIDTH, " ".repeat(column)));
}
