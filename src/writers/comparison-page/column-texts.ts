import { shortNumber } from "../number-text.js";

const DIGITS = 4;
const MISSING = "–";

/** What is there to show: neither null nor NaN. Infinity is a value (the PSNR of an image against itself). */
export function isValue(value: number | null | undefined): value is number {
  return typeof value === "number" && !Number.isNaN(value);
}

/**
 * The values of one column as texts that compare at a glance: all with the same decimals, four digits for the largest.
 * Where that would leave fewer than two digits of the smallest, each has its own four.
 */
export function columnTexts(values: readonly (number | null | undefined)[]): string[] {
  const sizes = values
    .filter((value) => isValue(value) && Number.isFinite(value) && value !== 0)
    .map((value) => Math.abs(value!));
  const power = Math.floor(Math.log10(Math.max(1e-9, ...sizes)));
  const isWhole = sizes.every(Number.isInteger);
  const decimals = isWhole ? 0 : Math.max(0, DIGITS - 1 - power);
  const isOneScale =
    power < 6 && decimals <= 6 && sizes.every((size) => isWhole || size * 10 ** decimals >= 10);
  return values.map((value) => {
    if (!isValue(value)) return MISSING;
    if (!Number.isFinite(value)) return value > 0 ? "∞" : "−∞";
    return isOneScale ? value.toFixed(decimals).replace("-", "−") : shortNumber(value, DIGITS);
  });
}
