import type { Flags, Option } from "./command.js";

/** Flags of every command that reconstructs: how it is carried out; none of them changes a result. */
export const ENGINE_OPTIONS: Readonly<Record<string, Option>> = {
  workers: {
    type: "whole",
    least: 1,
    value: "N",
    describe: "threads that compute",
    byDefault: "the cores",
  },
  memory: {
    type: "whole",
    least: 1,
    value: "MB",
    describe: "most memory for samples",
    byDefault: "a quarter of the machine's",
  },
  transform: {
    type: "text",
    value: "NAME",
    choices: ["simd", "plain"],
    describe: "transform engine",
    byDefault: "simd where the machine has it",
  },
  block: { type: "whole", least: 1, value: "N", hidden: true, describe: "readouts read at a time" },
};

/** The engine's options from the flags. */
export function runOptions(flags: Flags) {
  // The parser has checked each type.
  const [blockRows, workers, memoryMb] = [flags.block, flags.workers, flags.memory] as (number | undefined)[];
  const transform = flags.transform as "simd" | "plain" | undefined;
  return {
    ...(blockRows !== undefined && { blockRows }),
    ...(workers !== undefined && { workers }),
    ...(memoryMb !== undefined && { memoryBytes: memoryMb * 1e6 }),
    ...(transform !== undefined && { transform }),
  };
}

/** With commands that say where the time goes. */
export const TIMINGS_OPTION: Option = { type: "switch", describe: "print the time by part of the work" };
