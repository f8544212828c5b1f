import { columnsInView, cropRows, mapLayout } from "./echo-frame.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type FrameStage, withLength } from "./stage.js";

type Params = Record<string, never>;

const schema = { type: "object", additionalProperties: false, properties: {} };

/**
 * Take off the margin that `fit-matrix: { readout-margin: keep }` left along the readout, once what needed it is done:
 * crop about floor(N/2) to the reconstructed field of view, changing no value. `undisplace` does so itself.
 */
export const trimMargin: FrameStage<Params> = {
  id: "trim-margin",
  kind: "series",
  summary: "take off the readout's margin that fit-matrix was told to keep",
  schema,
  parse: (raw) => parseBySchema<Params>("trim-margin", schema, raw),
  plan(layout, _params, scan) {
    const columns = columnsInView(layout, scan);
    const { fovMm } = mapLayout(layout, scan);
    return {
      layout: { ...withLength(layout, "x", columns), fovMm },
      physics: { "pixels kept": `${columns} of ${axisLength(layout, "x")}` },
    };
  },
  run(frame, _params, context) {
    const before = axisLength(frame.layout, "x");
    const columns = columnsInView(frame.layout, context.scan);
    const { fovMm } = mapLayout(frame.layout, context.scan);
    const layout = { ...withLength(frame.layout, "x", columns), fovMm };
    if (columns === before) return { ...frame, layout };
    const out = context.allocate((frame.data.length / before) * columns);
    cropRows(frame.data, before, columns, out);
    return { ...frame, data: out, layout };
  },
};
