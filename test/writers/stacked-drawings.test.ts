import { expect, test } from "vitest";
import type { Drawing } from "../../src/writers/drawing.js";
import { drawingSvg } from "../../src/writers/drawing-svg.js";
import { stackedDrawings } from "../../src/writers/stacked-drawings.js";

const drawing = (title: string, heightPt: number): Drawing => ({
  widthPt: 100,
  heightPt,
  title,
  marks: [
    { kind: "text", text: title, at: [5, 10], anchor: "start", sizePt: 7, colour: "#222222" },
    {
      kind: "lines",
      pieces: [
        [
          [0, 1],
          [9, 2],
        ],
      ],
      colour: "#222222",
      widthPt: 1,
    },
    { kind: "dots", centres: [[3, 4]], colour: "#222222", radiusPt: 1 },
  ],
});

test("drawings stand below each other, nothing else changes", () => {
  const both = stackedDrawings("both", [drawing("upper", 40), drawing("lower", 30)]);
  expect(both).toMatchObject({ title: "both", widthPt: 100, heightPt: 70 });
  expect(both.marks.slice(0, 3)).toEqual(drawing("upper", 40).marks);
  expect(both.marks[3]).toMatchObject({ text: "lower", at: [5, 50] });
  expect(both.marks[4]).toMatchObject({
    pieces: [
      [
        [0, 41],
        [9, 42],
      ],
    ],
  });
  expect(both.marks[5]).toMatchObject({ centres: [[3, 44]] });
  expect(drawingSvg(both)).toContain('y="50"');
});
