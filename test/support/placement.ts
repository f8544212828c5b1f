import { placeLine } from "../../src/ingest/place.js";
import type { ReadoutHead } from "../../src/ingest/record.js";
import { DEFAULT_OVERRIDES, type ScanFacts } from "../../src/physics/scan.js";

/** Where a line of this counter lands along y in a matrix of `lines`, of which `center` is at k = 0. */
export function encodedIndexOf(counter: number, center: number, lines: number): number {
  const counters = {
    kspace_encode_step_1: counter,
    kspace_encode_step_2: 0,
    average: 0,
    slice: 0,
    contrast: 0,
    phase: 0,
    repetition: 0,
    set: 0,
    segment: 0,
  };
  const scan = {
    encoded: { matrix: { x: 8, y: lines, z: 1 }, fovMm: { x: 1, y: 1, z: 1 } },
    center: { y: center, z: 0 },
    lengths: { repetition: 1, set: 1, phase: 1, contrast: 1, slice: 1 },
    overrides: DEFAULT_OVERRIDES,
  };
  // placeLine looks at nothing else of a head or a scan.
  return placeLine({ row: 0, counters } as unknown as ReadoutHead, scan as unknown as ScanFacts, "a.h5").y;
}
