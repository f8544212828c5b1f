import { copyFileSync, existsSync, mkdirSync, readFileSync, truncateSync, writeFileSync } from "node:fs";
import path from "node:path";
import { beforeAll, describe, test } from "vitest";
import { pythonWithH5py } from "../simulate/outside-programs.js";
import {
  changeHeads,
  changeReadout,
  FIRST_LINE,
  writeHdf5WithoutReadouts,
  writeRawFile,
  writeTwoGroups,
} from "../support/raw-files.js";
import { carillon, scratchFolder } from "../support/run-carillon.js";

const folder = scratchFolder("faulty");
const at = (name: string) => path.join(folder, name);
const good = at("good.h5");
beforeAll(() => writeRawFile(good));

const header = (change: (xml: string) => string) => (file: string) => writeRawFile(file, { xml: change });
const without = (element: string) =>
  header((xml) => xml.replace(new RegExp(`<${element}>.*</${element}>`), ""));
const readout = (row: number, change: Parameters<typeof changeReadout>[1]) => (file: string) =>
  writeRawFile(file, { readouts: changeReadout(row, change) });

const EXPORT = "Export the file again";
const COPY = "The file is cut short or damaged: copy or export it again";
const HEADER = "Correct the header or export the file again";
const STANDARD = "Give a raw-data file in the ISMRMRD standard";
const NO_GROUP = "holds no raw group (a header `xml` beside a dataset `data` of head, traj and data)";

/** Each fault: how the file is made, and the whole of stderr behind `error: FILE: `. */
const FAULTS: readonly (readonly [name: string, make: (file: string) => unknown, says: string])[] = [
  ["missing", () => undefined, "no such file. Check the path"],
  ["folder", mkdirSync, "not a regular file. Give the path of a raw-data file"],
  [
    "not HDF5",
    (file) => writeFileSync(file, "not a raw file\n"),
    `cannot be opened as HDF5: file signature not found. ${STANDARD} (HDF5)`,
  ],
  ["empty", (file) => writeFileSync(file, ""), "the file is empty. Copy or export it again"],
  ["cut short", cutTo(6000), `cannot be opened as HDF5: only 6000 of its SIZE bytes are there. ${COPY}`],
  ["signature alone", cutTo(100), `cannot be opened as HDF5: only 100 of its SIZE bytes are there. ${COPY}`],
  [
    "no raw group",
    (file) => writeHdf5WithoutReadouts(file, { "notes/text": "hello" }),
    `${NO_GROUP}. ${STANDARD}`,
  ],
  [
    "no data",
    (file) => writeHdf5WithoutReadouts(file, { "dataset/xml": "<a/>" }),
    `${NO_GROUP}: beside /dataset/xml there are no readouts. ${STANDARD}`,
  ],
  [
    "data of another type",
    (file) => writeHdf5WithoutReadouts(file, { "dataset/xml": "<a/>", "dataset/data": "no list" }),
    `${NO_GROUP}: /dataset/data is something else, or damaged. ${STANDARD}`,
  ],
  [
    "no readouts",
    (file) => writeRawFile(file, { readouts: () => [] }),
    `/dataset/data: holds no readouts. ${EXPORT}`,
  ],
  [
    "only noise readouts",
    (file) => writeRawFile(file, { readouts: (all) => all.slice(0, FIRST_LINE) }),
    "holds no image readouts in this encoding. Choose another with --encoding",
  ],
  [
    "header cut short",
    header((xml) => xml.replace("</ismrmrdHeader>", "")),
    `header, line 2: is not well-formed XML: Unclosed tag 'ismrmrdHeader'. ${HEADER}`,
  ],
  ["empty header", header(() => ""), `header, line 1: is not well-formed XML: Start tag expected. ${HEADER}`],
  [
    "header of another kind",
    header(() => "<html></html>"),
    `header: must hold the element ismrmrdHeader. ${HEADER}`,
  ],
  [
    "no resonance frequency",
    without("H1resonanceFrequency_Hz"),
    `header/experimentalConditions/H1resonanceFrequency_Hz: is missing. ${HEADER}`,
  ],
  ["no reconstructed space", without("reconSpace"), `header/encoding 0/reconSpace: is missing. ${HEADER}`],
  ["no encoding", without("encoding"), `header/encoding: is missing. ${HEADER}`],
  [
    "zero matrix",
    header((xml) => xml.replace("<y>16</y>", "<y>0</y>")),
    `header/encoding 0/encodedSpace/matrixSize/y is 0; must be a whole number of at least 1. ${HEADER}`,
  ],
  [
    "field of view in words",
    header((xml) => xml.replace("<y>256</y>", "<y>wide</y>")),
    `header/encoding 0/encodedSpace/fieldOfView_mm/y is wide; must be a number. ${HEADER}`,
  ],
  [
    "simultaneous slices",
    header((xml) => xml.replace("</trajectory>", `</trajectory>${TWO_SLICES_AT_ONCE}`)),
    "header/encoding 0/parallelImaging/multiband/multiband_factor is 2; " +
      "simultaneous multi-slice is not supported. Separate the slices before",
  ],
  [
    "zero dwell time",
    (file) => writeRawFile(file, { readouts: changeHeads({ sample_time_us: 0 }) }),
    "readout 0: sample_time_us is 0; must be > 0. Correct the file, or give scan: { sample-time-us } in the recipe",
  ],
  [
    "sample that is no number",
    readout(5, ({ samples }) => ({ samples: samples.with(2 * (32 + 7) + 1, Number.NaN) })),
    "readout 5: channel 1, sample 7 is NaN; samples must be finite. " +
      "The file is damaged or was exported wrongly: export it again",
  ],
  [
    "line beyond the matrix",
    readout(5, ({ head }) => ({ head: { ...head, "idx.kspace_encode_step_1": 99 } })),
    "readout 5: kspace_encode_step_1 is 99; lands at line 99 of 16 (centre 8), beyond the encoded matrix. " +
      "Correct the counters, the centre in encodingLimits, or the encoded matrix",
  ],
  [
    "slice beyond the limits",
    readout(5, ({ head }) => ({ head: { ...head, "idx.slice": 3 } })),
    "readout 5: slice is 3; must be at most 0, the limit in the header. Correct the header's encodingLimits",
  ],
  [
    "readout beyond the matrix",
    readout(5, ({ head }) => ({ head: { ...head, center_sample: 20 } })),
    "readout 5: center_sample is 20; puts 32 samples at -4 to 27 of 32 encoded. " +
      "Correct center_sample or the header's encoded matrix, or use scan: { centre: measured }",
  ],
  [
    "payload too short",
    readout(5, ({ samples }) => ({ samples: samples.subarray(0, 40) })),
    "readout 5: data is 40 floats; must be 128 (2 x 2 channels x 32 samples). " +
      "The file was cut or its head is wrong: export it again",
  ],
  [
    "channels that change",
    readout(5, ({ head, samples }) => ({
      head: { ...head, active_channels: 1 },
      samples: samples.subarray(0, 64),
    })),
    "readout 5: active_channels is 1; must be 2, as in the readouts before it. " +
      "Export the file again with one set of channels",
  ],
];

const TWO_SLICES_AT_ONCE =
  "<parallelImaging><accelerationFactor><kspace_encoding_step_1>1</kspace_encoding_step_1>" +
  "<kspace_encoding_step_2>1</kspace_encoding_step_2></accelerationFactor>" +
  "<multiband><multiband_factor>2</multiband_factor></multiband></parallelImaging>";

function cutTo(bytes: number) {
  return (file: string) => {
    copyFileSync(good, file);
    truncateSync(file, bytes);
  };
}

describe.concurrent("a faulty file: one line that names file, place, value, rule and mend; exit 3", () => {
  test.for(FAULTS)("%s", async ([name, make, says], { expect }) => {
    const file = at(`${name}.h5`);
    await make(file);
    const out = at(`${name}, out/below`);
    const { code, stdout, stderr } = await carillon(["recon", file, "--out", out, "--quiet"]);
    const size = String(readFileSync(good).length);
    expect(stderr).toBe(`error: ${file}: ${says.replace("SIZE", size)}\n`);
    expect({ code, stdout }).toEqual({ code: 3, stdout: "" });
    expect(existsSync(path.dirname(out))).toBe(false);
  });

  test("inspect, recipe and --explain refuse it in the same words", async ({ expect }) => {
    const file = at("as a folder.h5");
    mkdirSync(file);
    for (const words of [
      ["inspect", file],
      ["recipe", file],
      ["recon", file, "--explain"],
    ]) {
      const { code, stderr } = await carillon(words);
      expect(stderr).toBe(`error: ${file}: not a regular file. Give the path of a raw-data file\n`);
      expect(code).toBe(3);
    }
  });

  test("--debug shows where it arose, the library's words too, and no page of source", async ({ expect }) => {
    const file = at("debug.h5");
    writeFileSync(file, "not a raw file\n");
    const { code, stderr } = await carillon(["inspect", file, "--debug"]);
    expect(code).toBe(3);
    expect(stderr).toMatch(/\n {4}at /);
    expect(stderr).toMatch(/caused by: /);
    expect(stderr.length).toBeLessThan(10_000);
  });

  test("text from a file cannot command the terminal", async ({ expect }) => {
    const file = await writeRawFile(at("escapes.h5"), {
      xml: (xml) => xml.replace(/<x>\d+<\/x>/, "<x>\u001b[2J\u0007</x>"),
    });
    const { code, stderr } = await carillon(["inspect", file]);
    expect(code).toBe(3);
    expect(stderr).toContain("matrixSize/x is ?[2J?; must be a number");
  });
});

describe.concurrent("files that leave a choice", () => {
  const python = pythonWithH5py();

  test.skipIf(!python)("several raw groups are named; --group chooses (needs h5py)", async ({ expect }) => {
    const file = writeTwoGroups(python!, good, at("two-groups.h5"));
    const refused = await carillon(["recon", file, "--out", at("two-groups"), "--quiet"]);
    expect(refused.stderr).toBe(
      `error: ${file}: holds several raw groups: dataset, second. Choose one with --group NAME\n`,
    );
    expect(refused.code).toBe(3);
    const chosen = await carillon(["recon", file, "--out", at("two-groups"), "--group", "second", "--json"]);
    expect(chosen.code).toBe(0);
    const wrong = await carillon(["inspect", file, "--group", "third"]);
    expect(wrong.stderr).toBe(
      `error: ${file}: group is third; not a raw group of this file. Choose one of: dataset, second\n`,
    );
    expect(wrong.code).toBe(3);
  });

  test("of several encodings inspect shows each, recon takes 0 and says so, --encoding another", async ({
    expect,
  }) => {
    const file = await writeRawFile(at("two-encodings.h5"), {
      xml: (xml) => xml.replace(/<encoding>.*<\/encoding>/, (encoding) => encoding + encoding),
      readouts: (all) =>
        all.map(({ head, samples }, row) => ({
          head: { ...head, encoding_space_ref: row > FIRST_LINE + 8 ? 1 : 0 },
          samples,
        })),
    });
    const looked = JSON.parse((await carillon(["inspect", file, "--json"])).stdout);
    expect(looked.encodings.map((e: { readouts: { image: number } }) => e.readouts.image)).toEqual([9, 7]);
    for (const [flags, missing] of [
      [[], 7],
      [["--encoding", "1"], 9],
    ] as const) {
      const out = at(`encodings-${missing}`);
      const { code, stdout, stderr } = await carillon(["recon", file, "--out", out, ...flags]);
      expect(code).toBe(0);
      expect(stdout).toContain(`${missing} of 16 lines missing (zero)`);
      expect(stderr).toContain(`the header has 2 encodings; this is number ${flags.length ? 1 : 0}`);
    }
    const beyond = await carillon(["inspect", file, "--encoding", "2"]);
    expect(beyond.stderr).toBe(
      `error: ${file}: encoding is 2; the header has 2, numbered from 0. Choose another with --encoding\n`,
    );
    expect(beyond.code).toBe(3);
  });

  test("a counter beyond the limits is a discrepancy that inspect names", async ({ expect }) => {
    const file = at("beyond.h5");
    await readout(5, ({ head }) => ({ head: { ...head, "idx.kspace_encode_step_1": 99 } }))(file);
    const { encodings } = JSON.parse((await carillon(["inspect", file, "--json"])).stdout);
    expect(encodings[0].discrepancies).toContainEqual({
      code: "beyond-limits",
      severity: "problem",
      message: "kspace_encode_step_1 goes up to 99, encodingLimits up to 15",
    });
  });
});
