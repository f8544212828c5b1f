import { execFileSync } from "node:child_process";
import { copyFileSync } from "node:fs";
import { loadHdf5 } from "../../src/ingest/hdf5.js";
import { acquire } from "../../src/simulate/acquire.js";
import { resolveAcquisition } from "../../src/simulate/acquisition.js";
import { headerXml } from "../../src/simulate/header.js";
import type { AcquisitionOptions } from "../../src/simulate/options.js";
import { type RawReadout, writeRaw } from "../../src/simulate/raw-writer.js";

/** Two noise readouts and 16 lines of two channels: the smallest file on which everything can go wrong. */
const SMALL: AcquisitionOptions = {
  matrix: { x: 16, y: 16 },
  coils: 2,
  slices: 1,
  dwellSeconds: 5e-6,
  noise: { sigma: 0.02, readouts: 2, samplesPerReadout: 32 },
};
/** Row of the first line in it. */
export const FIRST_LINE = 2;

export interface Changes {
  readonly acquisition?: AcquisitionOptions;
  readonly xml?: (xml: string) => string;
  readonly readouts?: (readouts: RawReadout[]) => RawReadout[];
}

/** Write a small raw file, changed as a test wants it. */
export async function writeRawFile(file: string, changes: Changes = {}): Promise<string> {
  const acquisition = resolveAcquisition({ ...SMALL, ...changes.acquisition });
  const xml = headerXml(acquisition);
  const readouts = [...acquire(acquisition)];
  const changed = changes.readouts?.(readouts) ?? readouts;
  await writeRaw(file, changes.xml?.(xml) ?? xml, changed.length, changed, { overwrite: true });
  return file;
}

/** Gives one readout another head or other samples. */
export function changeReadout(row: number, change: (readout: RawReadout) => Partial<RawReadout>) {
  return (readouts: RawReadout[]) =>
    readouts.map((readout, i) => (i === row ? { ...readout, ...change(readout) } : readout));
}

/** Gives every head other values. */
export function changeHeads(values: RawReadout["head"]) {
  return (readouts: RawReadout[]) =>
    readouts.map(({ head, samples }) => ({ head: { ...head, ...values }, samples }));
}

/** A file of many repetitions, all alike: large enough to be interrupted in the middle. */
export function writeLongFile(file: string, repetitions: number): Promise<string> {
  return writeRawFile(file, {
    xml: (xml) =>
      xml.replace(
        /(<repetition><minimum>0<\/minimum><maximum>)0/,
        (_, start) => `${start}${repetitions - 1}`,
      ),
    readouts: (all) => [
      ...all.slice(0, FIRST_LINE),
      ...Array.from({ length: repetitions }, (_, repetition) =>
        changeHeads({ "idx.repetition": repetition })(all.slice(FIRST_LINE)),
      ).flat(),
    ],
  });
}

/** An HDF5 file of groups and text alone: no list of readouts. */
export async function writeHdf5WithoutReadouts(
  file: string,
  texts: Readonly<Record<string, string>>,
): Promise<string> {
  await loadHdf5();
  const { File } = await import("h5wasm/node");
  const hdf5 = new File(file, "w");
  for (const group of new Set(Object.keys(texts).map((path) => path.split("/")[0]!)))
    hdf5.create_group(group);
  for (const [name, text] of Object.entries(texts))
    hdf5.create_dataset({ name, data: [text], shape: [1], dtype: "S" });
  hdf5.close();
  return file;
}

/** A copy of a raw file that holds its raw group under a second name as well; the HDF5 library here cannot copy one. */
export function writeTwoGroups(python: string, from: string, file: string): string {
  copyFileSync(from, file);
  const code = "import h5py, sys; f = h5py.File(sys.argv[1], 'a'); f.copy('dataset', 'second')";
  execFileSync(python, ["-c", code, file]);
  return file;
}
