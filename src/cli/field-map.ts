import { type Command, OUTPUT_OPTIONS, RAW_ARGUMENT, READ_OPTIONS, RECIPE_OPTIONS } from "./command.js";
import { ENGINE_OPTIONS, runOptions, TIMINGS_OPTION } from "./engine-flags.js";
import { report } from "./report.js";
import { SET_OPTION, stageNotes } from "./stage-notes.js";

/** `carillon field-map`: the off-resonance field of a raw file, without its images. */
export const fieldMap: Command = {
  name: "field-map",
  usage: "RAW --out FOLDER [flags]",
  summary: "measure the off-resonance field from the echoes of a raw file",
  arguments: [RAW_ARGUMENT],
  options: {
    ...OUTPUT_OPTIONS,
    ...RECIPE_OPTIONS,
    set: SET_OPTION,
    strict: { type: "switch", describe: "fail where header and readouts disagree or lines are missing" },
    ...READ_OPTIONS,
    ...ENGINE_OPTIONS,
    timings: TIMINGS_OPTION,
  },
  examples: [
    ["field-map scan.h5 --out field", "field-hz.npy, its mask, standard error and pictures in field/"],
    ["field-map scan.h5 --out smooth --set field-map.smoothing-px=4", "the same, smoothed more"],
    [
      "field-map scan.h5 --out fat --set separate-fat-water=on",
      "of three or more echoes, where there is fat",
    ],
    [
      "recon other.h5 --out straight --undisplace field/field-hz.npy",
      "put another scan's pixels back with it",
    ],
  ],
  notes: stageNotes,
  async run(flags, terminal, signal) {
    const { requestOf } = await import("./plan-file.js");
    const { withField } = await import("../recipe/shortcuts.js");
    const request = requestOf(flags, withField);
    const { startHdf5 } = await import("../ingest/hdf5.js");
    await startHdf5();
    const { writeReconstruction } = await import("../engine/write-reconstruction.js");
    const written = await writeReconstruction(flags.raw as string, request.prepare, {
      ...runOptions(flags),
      overrides: request.overrides,
      out: flags.out as string,
      mapsOnly: true,
      force: flags.force === true,
      strict: flags.strict === true,
      signal,
      progress: (done, total) => terminal.progress("measuring", done, total),
    });
    report(written, flags, terminal);
  },
};
