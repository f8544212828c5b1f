/** Where a fault lies: the file, the place in it (a field, a readout, a flag), and the value found there. */
export interface FaultPlace {
  readonly file?: string | undefined;
  readonly field?: string | undefined;
  readonly value?: unknown;
}

/**
 * The base of every error that a user can mend. The message is one line: file, place, value, rule, mend.
 * `exitCode` is what the command line ends with (DEVELOPERS.md, exit codes).
 */
export class CarillonError extends Error {
  readonly exitCode: number = 1;
  readonly place: FaultPlace;
  readonly rule: string;
  readonly mend: string;

  constructor(place: FaultPlace, rule: string, mend = "", options?: { cause?: unknown }) {
    super(sentence(place, rule, mend), options);
    this.name = new.target.name;
    this.place = place;
    this.rule = rule;
    this.mend = mend;
  }
}

/** The call is wrong: a flag, a recipe key, a parameter. Exit 2. */
export class UsageError extends CarillonError {
  override readonly exitCode = 2;
}

/** The input file is wrong, or holds what is not supported. Exit 3. */
export class InputError extends CarillonError {
  override readonly exitCode = 3;
}

/** An output could not be written. Exit 5. */
export class OutputError extends CarillonError {
  override readonly exitCode = 5;
}

function sentence(place: FaultPlace, rule: string, mend: string): string {
  const where = [place.file, place.field].filter((part) => part !== undefined).join(": ");
  const value =
    "value" in place && place.value !== undefined ? ` is ${shown(place.value)};` : where ? ":" : "";
  const text = `${where}${value} ${rule}`.trim().replace(/[.;:]$/, "");
  return oneLine(mend ? `${text}. ${mend}` : `${text}.`);
}

/** A value as an error shows it: short, on one line. */
function shown(value: unknown): string {
  const text = typeof value === "string" ? value : (JSON.stringify(value) ?? String(value));
  return text.length > 80 ? `${text.slice(0, 77)}...` : text === "" ? '""' : text;
}

function oneLine(text: string): string {
  return text.replace(/\s*\n\s*/g, " ");
}
