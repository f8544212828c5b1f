import type { Point } from "./drawing.js";

/** A rectangle in points. */
export interface Box {
  readonly left: number;
  readonly top: number;
  readonly right: number;
  readonly bottom: number;
}

export function isInside([x, y]: Point, box: Box): boolean {
  const slack = 1e-6; // a point on the frame is inside, rounding or not
  return x >= box.left - slack && x <= box.right + slack && y >= box.top - slack && y <= box.bottom + slack;
}

/** The parts of a line through `points` that lie in the box; a point with NaN ends a piece. */
export function clipLine(points: readonly Point[], box: Box): Point[][] {
  const pieces: Point[][] = [];
  let piece: Point[] = [];
  for (let i = 1; i < points.length; i++) {
    const [from, to] = [points[i - 1], points[i]];
    const part = from && to && clipSegment(from, to, box);
    if (!part) continue;
    const last = piece.at(-1);
    if (!last || last[0] !== part[0][0] || last[1] !== part[0][1]) {
      piece = [part[0]];
      pieces.push(piece);
    }
    piece.push(part[1]);
  }
  return pieces;
}

/**
 * The part of a segment inside a box; none where it passes by or is not finite.
 * Source: Liang and Barsky 1984, A new concept and method for line clipping, ACM Trans Graph 3:1.
 */
function clipSegment([x0, y0]: Point, [x1, y1]: Point, box: Box): [Point, Point] | undefined {
  const dx = x1 - x0;
  const dy = y1 - y0;
  if (!Number.isFinite(dx) || !Number.isFinite(dy)) return undefined;
  let start = 0;
  let end = 1;
  // for each side: the step outward across it, and how far inside the start is
  const sides = [
    [-dx, x0 - box.left],
    [dx, box.right - x0],
    [-dy, y0 - box.top],
    [dy, box.bottom - y0],
  ] as const;
  for (const [outward, inside] of sides) {
    if (outward === 0 && inside < 0) return undefined;
    if (outward < 0) start = Math.max(start, inside / outward);
    if (outward > 0) end = Math.min(end, inside / outward);
  }
  if (start > end) return undefined;
  const at = (share: number): Point => {
    if (share === 0) return [x0, y0]; // exact, so that neighbouring parts join
    return share === 1 ? [x1, y1] : [x0 + share * dx, y0 + share * dy];
  };
  return [at(start), at(end)];
}
