import type { Extent } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import type { ScanIndex } from "./scan-index.js";

/** Which lines of k-space are there, over all frames, against what the limits and counters let expect. */
export interface Coverage {
  readonly kind: "full" | "accelerated" | "elliptical" | "gaps";
  /** Lines expected in all acquired frames: the product of the ranges of the two line counters. */
  readonly expected: number;
  readonly missing: number;
  readonly firstGap: string;
  /** Readouts beyond the number of averages. */
  readonly duplicates: number;
  /**
   * Acquired part of a symmetric coverage, by axis, 1 where k = 0 is in the middle:
   * lines / (2 x lines of the longer side), as vendors state it (5/8, 6/8, ...).
   */
  readonly partialFourier: Readonly<Record<"x" | "y" | "z", number>>;
  /** Lines of the coverage against the encoded matrix (phase resolution), 1 where they fill it. */
  readonly phaseResolution: Readonly<Record<"y" | "z", number>>;
}

interface Span {
  minimum: number;
  maximum: number;
}

export function coverageOf(index: ScanIndex, scan: ScanFacts): Coverage {
  const y = span(index, "y");
  const z = span(index, "z");
  const perFrame = (y.maximum - y.minimum + 1) * (z.maximum - z.minimum + 1);
  const gaps = countGaps(index, scan, y, z);
  const expected = perFrame * index.frames.size;
  const accelerated = scan.acceleration.y * scan.acceleration.z > 1;
  const elliptical = scan.dimensions === 3 && gaps.missing > 0 && gaps.outsideEllipse === gaps.missing;
  return {
    kind: gaps.missing === 0 ? "full" : accelerated ? "accelerated" : elliptical ? "elliptical" : "gaps",
    expected,
    missing: gaps.missing,
    firstGap: gaps.first,
    duplicates: gaps.duplicates,
    partialFourier: {
      x: extentFraction(scan.acquired.x, scan.encoded.matrix.x),
      y: symmetricFraction(y, scan.center.y, scan.encoded.matrix.y),
      z: symmetricFraction(z, scan.center.z, scan.encoded.matrix.z),
    },
    phaseResolution: {
      y: resolution(y, scan.center.y, scan.encoded.matrix.y),
      z: resolution(z, scan.center.z, scan.encoded.matrix.z),
    },
  };
}

/** The line counter of an axis in a readout's head, and what encodingLimits calls it. */
const LINE_COUNTER = {
  y: ["kspace_encode_step_1", "kspace_encoding_step_1"],
  z: ["kspace_encode_step_2", "kspace_encoding_step_2"],
} as const;

/** The range of a line counter that the limits state, widened by what the readouts hold. */
function span(index: ScanIndex, axis: "y" | "z"): Span {
  const [counter, limit] = LINE_COUNTER[axis];
  const limits = index.encoding.limits[limit];
  const seen = index.ranges[counter];
  return {
    minimum: Math.min(limits?.minimum ?? seen.minimum, seen.minimum),
    maximum: Math.max(limits?.maximum ?? seen.maximum, seen.maximum),
  };
}

function countGaps(index: ScanIndex, scan: ScanFacts, y: Span, z: Span) {
  let missing = 0;
  let outsideEllipse = 0;
  let duplicates = 0;
  let first = "";
  const radius = (value: number, center: number, lines: number) => (value - center) / (lines / 2);
  for (const frame of index.frames.values())
    for (let q = z.minimum; q <= z.maximum; q++)
      for (let p = y.minimum; p <= y.maximum; p++) {
        const count = frame.lines.get(q * 65536 + p) ?? 0;
        if (count > scan.averages && scan.overrides.averageOver.length === 0)
          duplicates += count - scan.averages;
        if (count > 0) continue;
        missing++;
        if (!first)
          first = `slice ${frame.counters.slice}, line ${p}${scan.dimensions === 3 ? `, partition ${q}` : ""}`;
        const r =
          radius(p, scan.center.y, scan.encoded.matrix.y) ** 2 +
          radius(q, scan.center.z, scan.encoded.matrix.z) ** 2;
        // Half a line of margin: scanners differ in whether the rim of the ellipse is in.
        if (r > 0.97) outsideEllipse++;
      }
  return { missing, outsideEllipse, duplicates, first };
}

/** Acquired lines over twice the longer side; a coverage short by one line (even N) counts as whole. */
function symmetricFraction(range: Span, center: number, lines: number): number {
  if (lines <= 1) return 1;
  const below = center - range.minimum;
  const above = range.maximum - center;
  const longer = Math.max(below, above + 1);
  const shorter = Math.min(below, above + 1);
  return longer - shorter <= 1 ? 1 : (below + above + 1) / (2 * longer);
}

function extentFraction(extent: Extent, samples: number): number {
  return symmetricFraction({ minimum: extent.first, maximum: extent.last }, Math.floor(samples / 2), samples);
}

function resolution(range: Span, center: number, lines: number): number {
  const reach = Math.max(center - range.minimum, range.maximum - center + 1);
  return lines <= 1 ? 1 : Math.min(1, (2 * reach) / lines);
}

/** The span of a line counter on the encoded grid. */
export function lineExtent(index: ScanIndex, axis: "y" | "z", center: number, lines: number): Extent {
  const range = span(index, axis);
  const shift = Math.floor(lines / 2) - center;
  return { first: Math.max(0, range.minimum + shift), last: Math.min(lines - 1, range.maximum + shift) };
}
