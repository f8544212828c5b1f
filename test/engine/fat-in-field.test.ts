import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { withShortcuts } from "../../src/recipe/shortcuts.js";
import { type AcquisitionOptions, simulateRaw } from "../../src/simulate/index.js";
import { reconstructed } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

/**
 * Field maps of objects that hold fat, without separating it. The truth is the slope that the files were simulated with,
 * exact k-space at each sample's own time; the oil has the six peaks of Hamilton 2011.
 */
const folder = scratchFolder("fat-in-field");
const at = (name: string) => path.join(folder, name);
const N = 128;
const MM = 240 / N;

const THREE = [2.3e-3, 3.9e-3, 5.5e-3];
const BASE: AcquisitionOptions = {
  phantom: "belfry",
  matrix: { x: N, y: N },
  fovMm: { x: 240, y: 240 },
  coils: 4,
  slices: 1,
  echoTimesSeconds: THREE,
  dwellSeconds: 16e-6,
  fieldSlopeHzPerMm: { x: 0.8, y: -0.4 },
};
const CASES: Readonly<Record<string, AcquisitionOptions>> = {
  alternating: { ...BASE, reversedEchoes: "odd" },
  forward: BASE,
  "uneven times": { ...BASE, echoTimesSeconds: [2.3e-3, 4.6e-3, 9.2e-3], dwellSeconds: 8e-6 },
  "four echoes": { ...BASE, echoTimesSeconds: [1.2e-3, 2.2e-3, 3.2e-3, 4.2e-3], dwellSeconds: 4e-6 },
  // the vial of water, 40 pixels away, lies beyond the wrap limit
  steep: { ...BASE, fieldSlopeHzPerMm: { x: 3, y: -1 }, dwellSeconds: 8e-6 },
  // the oil's vial lies at -620 Hz, its range ends at 312
  "steepest, alternating": {
    ...BASE,
    fieldSlopeHzPerMm: { x: 4, y: 3 },
    dwellSeconds: 12e-6,
    reversedEchoes: "odd",
  },
  // beyond half a turn (312 Hz, 417 Hz) everywhere: displacement in opposite directions, or uneven gaps, tell the turn
  "far off, alternating": { ...BASE, offResonanceHz: -400, reversedEchoes: "odd" },
  "far off, uneven times": {
    ...BASE,
    offResonanceHz: 700,
    echoTimesSeconds: [2.3e-3, 3.5e-3, 6.4e-3],
    dwellSeconds: 12e-6,
  },
  "steep, alternating": {
    ...BASE,
    fieldSlopeHzPerMm: { x: 2, y: -1 },
    dwellSeconds: 12e-6,
    reversedEchoes: "odd",
  },
};
/** Water alone, over nearly the whole range between wraps: nothing may be taken for fat. */
const WATER: Readonly<Record<string, AcquisitionOptions>> = {
  disc: { ...BASE, phantom: "disc", fieldSlopeHzPerMm: { x: 4, y: 3 }, dwellSeconds: 8e-6 },
  "disc, alternating": {
    ...BASE,
    phantom: "disc",
    fieldSlopeHzPerMm: { x: 4, y: 3 },
    dwellSeconds: 8e-6,
    reversedEchoes: "odd",
  },
};
const OTHERS: Readonly<Record<string, AcquisitionOptions>> = {
  two: { ...BASE, echoTimesSeconds: THREE.slice(0, 2) },
  offset: { ...BASE, phantom: "disc", offResonanceHz: 300 },
};

beforeAll(async () => {
  for (const [name, options] of Object.entries({ ...CASES, ...WATER, ...OTHERS }))
    await simulateRaw({ ...options, file: at(`${name}.h5`) });
}, 60_000);

async function measured(name: string, settings: readonly string[] = []) {
  const { maps, findings } = await reconstructed(at(`${name}.h5`), settings, {}, {}, (recipe) =>
    withShortcuts(recipe, { undisplace: "measured" }),
  );
  const found = (stage: string, label: string) =>
    findings.find((finding) => finding.stage === stage && finding.name === label)?.value;
  return { field: maps.get("field-hz")!, mask: maps.get("field-mask")!, found };
}

function truthHz(options: AcquisitionOptions, pixel: number): number {
  const { x, y } = options.fieldSlopeHzPerMm!;
  return (
    (options.offResonanceHz ?? 0) + MM * (x * ((pixel % N) - N / 2) + y * (Math.floor(pixel / N) - N / 2))
  );
}

/** Sizes of the error inside the mask, rising. */
function errorsOf(options: AcquisitionOptions, field: Float32Array, mask: Float32Array): Float32Array {
  return field
    .map((hz, i) => Math.abs(hz - truthHz(options, i)))
    .filter((_, i) => mask[i])
    .sort();
}

describe("three or more echoes of an object with oil", () => {
  test.each(Object.keys(CASES))(
    "%s: the map is the field of water; oil is left out, not mistaken",
    async (name) => {
      const { field, mask, found } = await measured(name);
      const errors = errorsOf(CASES[name]!, field, mask);
      // Noise alone: a standard error of about 0.8 Hz. Taken for field, oil is 220 Hz off.
      expect(errors[errors.length >> 1]).toBeLessThan(0.6);
      expect(errors[Math.floor(0.95 * errors.length)]).toBeLessThan(2.5);
      expect(errors.at(-1)).toBeLessThan(30); // pixels at a rim
      expect(errors.length).toBeGreaterThan(4000); // of 4400 of water
      expect(found("field-map", "pixels left out, not water from echo to echo")).toBeGreaterThan(250); // 300 of oil, and their rims
    },
  );

  test("beyond the mask the map keeps to about the range inside", async () => {
    const { field, mask } = await measured("alternating");
    const inside = field.filter((_, i) => mask[i]).sort();
    const room = 0.25 * (inside.at(-1)! - inside[0]!);
    const all = field.slice().sort();
    expect(all[0]).toBeGreaterThan(inside[0]! - room);
    expect(all.at(-1)).toBeLessThan(inside.at(-1)! + room);
  });
});

describe("the separation's field", () => {
  test.each(["far off, alternating", "far off, uneven times"])("%s: the turn is told too", async (name) => {
    const { maps } = await reconstructed(at(`${name}.h5`), [], {}, {}, (recipe) =>
      withShortcuts(recipe, { separate: "fat-water" }),
    );
    const errors = errorsOf(CASES[name]!, maps.get("field-hz")!, maps.get("field-mask")!);
    expect(errors[Math.floor(0.95 * errors.length)]).toBeLessThan(3);
    expect(errors.at(-1)).toBeLessThan(20);
  });
});

describe("water alone", () => {
  test.each(Object.keys(WATER))("%s: nothing of it is taken for fat", async (name) => {
    const { field, mask } = await measured(name);
    const errors = errorsOf(WATER[name]!, field, mask);
    expect(errors.length).toBeGreaterThan(3250); // of 3300
    expect(errors.at(-1)).toBeLessThan(15);
  });
});

describe("two echoes of it", () => {
  test("fat does count as field: what the placement statement warns of", async () => {
    const { field, mask, found } = await measured("two");
    const errors = errorsOf(OTHERS.two!, field, mask);
    expect(errors[errors.length >> 1]).toBeLessThan(1.5);
    expect(errors[Math.floor(0.97 * errors.length)]).toBeGreaterThan(200);
    expect(found("field-map", "pixels left out, not water from echo to echo")).toBeUndefined();
  });
});

test("where next to nothing follows one species the map is refused, and the mend named", async () => {
  // Echo times that are not those of the file: 300 Hz turn by a quarter in the 0.8 ms between.
  const change = (recipe: Parameters<typeof withShortcuts>[0]) =>
    withShortcuts(recipe, { undisplace: "measured" });
  await expect(reconstructed(at("offset.h5"), [], { echoMs: [2.3, 3.1, 5.5] }, {}, change)).rejects.toThrow(
    /of \d+ pixels with signal; so few follow one species, water.*separate-fat-water/,
  );
});
