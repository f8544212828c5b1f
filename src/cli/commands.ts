import { budget } from "./budget.js";
import type { Command } from "./command.js";
import { compare } from "./compare.js";
import { fieldMap } from "./field-map.js";
import { inspect } from "./inspect.js";
import { recipe } from "./recipe.js";
import { recon } from "./recon.js";
import { simulate } from "./simulate.js";
import { taper } from "./taper.js";

/** Every command, in the order of help. Their modules load the engine only when they run. */
export const COMMANDS: readonly Command[] = [
  inspect,
  recon,
  compare,
  fieldMap,
  budget,
  taper,
  recipe,
  simulate,
];
