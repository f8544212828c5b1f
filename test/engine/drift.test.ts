import { writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, expect, test } from "vitest";
import { acquire } from "../../src/simulate/acquire.js";
import { resolveAcquisition } from "../../src/simulate/acquisition.js";
import { headerXml } from "../../src/simulate/header.js";
import { type RawReadout, writeRaw } from "../../src/simulate/raw-writer.js";
import { npyBytes } from "../../src/writers/npy.js";
import { magnitudes } from "../support/conformance-cases.js";
import { reconstructed, relativeDifference } from "../support/reconstruct.js";
import { scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("drift");
const at = (name: string) => path.join(folder, name);

const DWELL_SECONDS = 20e-6;
const SAMPLES = 128;
const ECHO_SECONDS = [0.006, 0.009];
const acquisition = resolveAcquisition({
  matrix: { x: 64, y: 64 },
  coils: 2,
  slices: 1,
  echoTimesSeconds: ECHO_SECONDS,
  reversedEchoes: "odd",
  dwellSeconds: DWELL_SECONDS,
  noise: { sigma: 0 },
});

/** Hz at a place in the file; not linear, as a magnet that warms up. */
const driftAt = (readout: number) => 60 * Math.tanh(readout / 60) + 5 * Math.sin(readout / 9);

/** `exp(-i 2 pi f t)` on samples in the order of time, t from the excitation. */
function drifted(readout: RawReadout, hz: number, centreSeconds: number, centre: number): RawReadout {
  const samples = readout.samples.slice();
  for (let i = 0; i < samples.length; i += 2) {
    const seconds = centreSeconds + (((i / 2) % SAMPLES) - centre) * DWELL_SECONDS;
    const [c, s] = [Math.cos(2 * Math.PI * hz * seconds), -Math.sin(2 * Math.PI * hz * seconds)];
    samples[i] = readout.samples[i]! * c - readout.samples[i + 1]! * s;
    samples[i + 1] = readout.samples[i]! * s + readout.samples[i + 1]! * c;
  }
  return { ...readout, samples };
}

/** The scan with a drift; a navigator (the middle line of echo 0) before every eighth image readout. */
function* scan(isDrifting: boolean, table: number[]): Generator<RawReadout> {
  const readouts = [...acquire(acquisition)];
  const navigator = readouts.find(({ head }) => head["idx.kspace_encode_step_1"] === 32)!;
  const navigation = 1n << 22n; // flag 23 of the standard
  let place = 0;
  const turned = (readout: RawReadout, contrast: number) => {
    const hz = isDrifting ? driftAt(place) : 0;
    place++;
    return drifted(readout, hz, ECHO_SECONDS[contrast]!, Number(readout.head.center_sample));
  };
  for (const [i, readout] of readouts.entries()) {
    if (i % 8 === 0) {
      const flags = BigInt(navigator.head.flags as bigint) | navigation;
      yield turned({ ...navigator, head: { ...navigator.head, flags } }, 0);
    }
    table.push(isDrifting ? driftAt(place) : 0);
    yield turned(readout, Number(readout.head["idx.contrast"]));
  }
}

const table: number[] = [];
beforeAll(async () => {
  const xml = headerXml(acquisition);
  const count = [...scan(false, [])].length;
  await writeRaw(at("still.h5"), xml, count, scan(false, []));
  await writeRaw(at("drifting.h5"), xml, count, scan(true, table));
  writeFileSync(at("table.npy"), npyBytes("<f8", [table.length], Float64Array.from(table)));
  writeFileSync(at("short.npy"), npyBytes("<f8", [3], Float64Array.of(1, 2, 3)));
});

async function image(file: string, settings: readonly string[]): Promise<Float32Array> {
  const { result, plan } = await reconstructed(at(file), settings);
  return magnitudes(result, plan.result.kind);
}

describe("a resonance that drifts, ghosts and displaces, and", () => {
  test("a table of Hz takes it off exactly, in echoes of both directions", async () => {
    const still = await image("still.h5", []);
    expect(relativeDifference(await image("drifting.h5", []), still)).toBeGreaterThan(0.1);
    const mended = await image("drifting.h5", [`shift-readout.drift=${at("table.npy")}`]);
    expect(relativeDifference(mended, still)).toBeLessThan(2e-6); // float32 samples, turned there and back
  });

  test("navigators find it: against the first, linear in between", async () => {
    const still = await image("still.h5", []);
    // The first navigator has drifted by driftAt(0) = 0: what is relative to it is relative to the truth.
    const mended = await image("drifting.h5", ["shift-readout.drift=navigators"]);
    // Between navigators nine readouts apart the drift bends by up to 9^2 / 8 of its second derivative, 5 / 81: 0.6 Hz,
    // by the second echo a phase of 2 pi 0.6 0.009 = 0.035.
    expect(relativeDifference(mended, still)).toBeLessThan(0.035);
  });

  test("on one that stays, they change nothing", async () => {
    const still = await image("still.h5", []);
    expect(
      relativeDifference(await image("still.h5", ["shift-readout.drift=navigators"]), still),
    ).toBeLessThan(1e-5);
  });

  test("a table that does not fit, or navigators that are not there, are refused", async () => {
    await expect(image("drifting.h5", [`shift-readout.drift=${at("short.npy")}`])).rejects.toThrow(
      /shape is 3; must hold one number for each of the 128 image readouts/,
    );
    await expect(
      reconstructed("data/conformance/off-resonance.h5", ["shift-readout.drift=navigators"]),
    ).rejects.toThrow(/the file has no navigator readouts/);
    await expect(image("still.h5", ["shift-readout.drift=perhaps"])).rejects.toThrow(
      /must be none, navigators or a .npy/,
    );
  });
});
