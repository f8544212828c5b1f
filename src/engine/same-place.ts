import { axisLength, type Layout } from "../stages/stage.js";
import { pixelSizeMm } from "./plan.js";

type Axis = "x" | "y" | "z";

/**
 * Where in one image lies what is at `position` in another: pixel i of N is at (i - floor(N/2)) pixels from the centre,
 * which all have in common, whatever their matrices and fields of view.
 * @param position along the axis, pixels of `from`, the first at 0
 * @returns pixels of `to`; beyond its ends where it does not reach so far
 */
export function samePlace(position: number, axis: Axis, from: Layout, to: Layout): number {
  if (isSameAxis(axis, from, to)) return position;
  const centre = (layout: Layout) => Math.floor(axisLength(layout, axis) / 2);
  const scale = pixelSizeMm(from)[axis] / pixelSizeMm(to)[axis];
  return centre(to) + (position - centre(from)) * scale;
}

/** The pixel of `to` that holds what is at a pixel of `from`; undefined beyond its ends. */
export function samePixel(index: number, axis: Axis, from: Layout, to: Layout): number | undefined {
  const nearest = Math.round(samePlace(index, axis, from, to));
  return nearest >= 0 && nearest < axisLength(to, axis) ? nearest : undefined;
}

/** True where pixels of the same index along x and y lie at the same place. */
export function isSameGrid(one: Layout, other: Layout): boolean {
  return isSameAxis("x", one, other) && isSameAxis("y", one, other);
}

/** Fields of view that differ by rounding alone are the same. */
const ROUNDING = 1e-9;

function isSameAxis(axis: Axis, one: Layout, other: Layout): boolean {
  if (axisLength(one, axis) !== axisLength(other, axis)) return false;
  return Math.abs(one.fovMm[axis] / other.fovMm[axis] - 1) < ROUNDING;
}
