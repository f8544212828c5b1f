import { expect, test } from "vitest";
import { csvText } from "../../src/writers/csv.js";

test("one head line, lines ended and cells quoted as RFC 4180 says; what is no number is empty", () => {
  const rows = [
    { name: 'a "b", c', hz: 0.1 + 0.2, ok: true },
    { name: "d\ne", hz: Number.NaN, ok: null },
  ];
  expect(csvText(rows)).toBe('name,hz,ok\r\n"a ""b"", c",0.30000000000000004,true\r\n"d\ne",,\r\n');
});
