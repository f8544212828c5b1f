import type { Drawing, Mark, Point } from "./drawing.js";

/** Drawings of one width below each other, as one. */
export function stackedDrawings(title: string, drawings: readonly Drawing[]): Drawing {
  let heightPt = 0;
  const marks: Mark[] = [];
  for (const drawing of drawings) {
    marks.push(...drawing.marks.map((mark) => movedDown(mark, heightPt)));
    heightPt += drawing.heightPt;
  }
  return { widthPt: Math.max(...drawings.map(({ widthPt }) => widthPt)), heightPt, title, marks };
}

function movedDown(mark: Mark, byPt: number): Mark {
  const down = ([x, y]: Point): Point => [x, y + byPt];
  if (mark.kind === "text") return { ...mark, at: down(mark.at) };
  if (mark.kind === "dots") return { ...mark, centres: mark.centres.map(down) };
  return { ...mark, pieces: mark.pieces.map((piece) => piece.map(down)) };
}
