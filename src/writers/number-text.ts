/** A number for a person: at most `digits` significant ones, a true minus sign, no unit. */
export function shortNumber(value: number, digits = 3): string {
  return String(Number(value.toPrecision(digits)))
    .replace("e+", "e")
    .replaceAll("-", "\u2212");
}

/** The largest of 1, 2, 5 times a power of ten that is not above `limit` (> 0). */
export function roundLength(limit: number): number {
  const power = 10 ** Math.floor(Math.log10(limit) + 1e-9); // 1e-9: the logarithm of 1000 falls just short of 3
  const factor = [5, 2, 1].find((each) => each * power <= limit * (1 + 1e-9)) ?? 1;
  return Number((factor * power).toPrecision(1)); // 5 * 10 ** -1 and the like carry a rounding error
}
