import { describe, expect, test } from "vitest";
import { createPlainKernels } from "../../src/kernels/plain-kernels.js";
import { DEFAULT_OVERRIDES, type ScanFacts } from "../../src/physics/scan.js";
import { STAGES } from "../../src/stages/registry.js";
import {
  type Frame,
  floatCount,
  type Given,
  type Layout,
  type StageContext,
} from "../../src/stages/stage.js";

/** A scan of 3 echoes, 5 lines of 8 samples in 3 partitions, 2 channels; twofold oversampled, reconstructed finer along y. */
const SCAN: ScanFacts = {
  encoding: 0,
  trajectory: "cartesian",
  dimensions: 3,
  encoded: { matrix: { x: 8, y: 5, z: 3 }, fovMm: { x: 80, y: 50, z: 30 } },
  reconstructed: { matrix: { x: 4, y: 7, z: 3 }, fovMm: { x: 40, y: 50, z: 30 } },
  center: { y: 2, z: 1 },
  acquired: { x: { first: 0, last: 7 }, y: { first: 0, last: 4 }, z: { first: 0, last: 2 } },
  measuredCenter: {},
  lengths: { repetition: 1, set: 1, phase: 1, contrast: 3, slice: 1 },
  averages: 1,
  channels: 2,
  fieldT: 1.5,
  resonanceHz: 63.87e6,
  dwellSeconds: 5e-6,
  relativeReceiverNoiseBandwidth: 1,
  noise: {
    readouts: 1,
    samples: 99,
    dwellSeconds: 5e-6,
    covariance: Float64Array.of(1, 0, 0.3, -0.2, 0.3, 0.2, 1.5, 0),
  },
  echoTimesSeconds: [0.002, 0.0031, 0.0042],
  acceleration: { y: 1, z: 1 },
  calibrationMode: undefined,
  poses: [undefined],
  sliceOrder: [0],
  polarity: ["forward", "reverse", "forward"],
  overrides: DEFAULT_OVERRIDES,
};

const kernels = createPlainKernels();
const context: StageContext = {
  scan: SCAN,
  kernels,
  allocate: (floats) => new Float32Array(floats).fill(Number.NaN), // what a stage does not write would show
  release: () => undefined,
  counters: { repetition: 0, set: 0, phase: 0, contrast: 0, slice: 0 },
  arrays: new Map(),
  emit: () => undefined,
  emitted: () => new Float32Array(3 * 7 * 4),
  note: () => undefined,
};

/** The maps that a stage's predecessors hand out: only what moves pixels needs one. */
function given(id: string): Given {
  const layout: Layout = { ...FIRST, axes: ["z", "y", "x"], shape: [3, 7, 4], kind: "real" };
  const field = { name: "field-hz", unit: "Hz", describe: "", layout };
  return { arrays: new Map(), maps: id === "undisplace" ? [field] : [] };
}

const FIRST: Layout = {
  axes: ["contrast", "coil", "z", "y", "x"],
  shape: [3, 2, 3, 5, 8],
  kind: "complex",
  fovMm: SCAN.encoded.fovMm,
  inImage: [],
  acquired: SCAN.acquired,
};

/** The layout that a stage of the flow finds: what all stages before it planned. */
function inputOf(id: string): Layout {
  let layout = FIRST;
  for (const stage of STAGES) {
    if (stage.id === id) break;
    layout = stage.plan(layout, stage.parse({}), SCAN, given(stage.id)).layout;
  }
  return layout;
}

function ramp(floats: number): Float32Array {
  return Float32Array.from({ length: floats }, (_, i) => Math.sin(1.7 * i) + 0.1 * Math.cos(0.3 * i * i));
}

describe.each(STAGES.map((stage) => [stage.id, stage] as const))("%s", (id, stage) => {
  const input = inputOf(id);
  const params = stage.parse({});
  const planned = stage.plan(input, params, SCAN, given(id));

  const run = (): { data: Float32Array; floats: number } => {
    if (stage.kind !== "readout") {
      const frame: Frame = {
        data: ramp(floatCount(input)),
        layout: input,
        sampling: { counts: new Uint16Array(45).fill(1) },
        noise: { whitened: true, gain: 1 },
      };
      const out = stage.run(frame, params, context);
      expect(out.layout).toEqual(planned.layout);
      return { data: out.data, floats: floatCount(planned.layout) };
    }
    const samples = input.shape.at(-1)!;
    const lines = {
      data: ramp(2 * 45 * 2 * samples),
      lines: 45,
      coils: 2,
      samples,
      backward: new Uint8Array(45),
      echoes: new Uint16Array(45),
    };
    const out = stage.run(lines, params, context);
    expect(out.samples).toBe(planned.layout.shape.at(-1));
    return { data: out.data, floats: floatCount(planned.layout) };
  };

  test("gives what it planned, every value finite, the same bits twice", () => {
    const first = run();
    expect(first.data.length).toBe(first.floats);
    expect(first.data.every(Number.isFinite)).toBe(true);
    expect(run().data).toEqual(first.data);
  });

  test("refuses an unknown key and names the nearest known one", () => {
    expect(() => stage.parse({ notAKey: 1 })).toThrow(/notAKey: unknown key/);
    const known = Object.keys((stage.schema as { properties: object }).properties)[0];
    if (known) expect(() => stage.parse({ [`${known}s`]: 1 })).toThrow(`Did you mean ${known}?`);
  });

  test("parse gives the same again, and leaves its input alone", () => {
    const raw = Object.freeze({});
    expect(stage.parse(structuredClone(stage.parse(raw)))).toEqual(params);
  });
});

test("each id occurs once, and kinds come in the order of the flow", () => {
  const ids = STAGES.map(({ id }) => id);
  expect(new Set(ids).size).toBe(ids.length);
  expect(ids).toEqual([
    "shift-readout",
    "trim-oversampling",
    "prewhiten",
    "apodize",
    "inverse-fft",
    "fit-matrix",
    "field-map",
    "separate-fat-water",
    "undisplace",
    "trim-margin",
    "combine-coils",
  ]);
});
