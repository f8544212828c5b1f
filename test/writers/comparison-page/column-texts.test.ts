import { expect, test } from "vitest";
import { columnTexts, isValue } from "../../../src/writers/comparison-page/column-texts.js";

test.each([
  ["four digits for the largest", [1.2071, 0.5, 1], ["1.207", "0.500", "1.000"]],
  ["a true minus sign", [-8.71, 12.3], ["−8.71", "12.30"]],
  ["whole numbers stay whole", [12, -3, 40_000], ["12", "−3", "40000"]],
  ["small ones by themselves", [0.000312, 0.000345], ["0.000312", "0.000345"]],
  ["each by itself where the scales are apart", [0.0005, 8.91234], ["0.0005", "8.912"]],
  ["very large ones by themselves", [1.5e9, 2.25e9], ["1500000000", "2250000000"]],
  [
    "missing, not a number, infinite",
    [null, undefined, Number.NaN, Infinity, -Infinity, 2.5],
    ["–", "–", "–", "∞", "−∞", "2.500"],
  ],
  ["only zeros", [0, 0], ["0", "0"]],
  ["nothing at all", [null], ["–"]],
])("%s", (_, values, texts) => {
  expect(columnTexts(values)).toEqual(texts);
});

test("infinity is a value, null and NaN are none", () => {
  expect([Infinity, 0, null, undefined, Number.NaN].map(isValue)).toEqual([true, true, false, false, false]);
});
