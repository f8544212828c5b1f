import { expect, test } from "vitest";
import { csvText } from "../../src/writers/csv.js";

test("a head line, CRLF, quotes where RFC 4180 asks for them, nothing for what is missing", () => {
  const rows = [
    { name: "a, b", value: 0.1, note: 'say "x"' },
    { name: "line\nbreak", value: Number.NaN, note: undefined },
    { name: "plain", value: 1e-12, note: null },
  ];
  expect(csvText(rows)).toBe(
    'name,value,note\r\n"a, b",0.1,"say ""x"""\r\n"line\nbreak",,\r\nplain,1e-12,\r\n',
  );
});

test("the columns are those of the first row, in its order", () => {
  expect(
    csvText([
      { b: 1, a: true },
      { a: false, b: 2 },
    ] as const),
  ).toBe("b,a\r\n1,true\r\n2,false\r\n");
});
