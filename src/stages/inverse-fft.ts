import { SPATIAL_AXES } from "../physics/layout.js";
import { toImage } from "./domain.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type FrameStage } from "./stage.js";

type Params = Record<string, never>;

const schema = { type: "object", additionalProperties: false, properties: {} };

/**
 * From k-space to image: centred unitary inverse DFT along every spatial axis that is not in image space yet, of any
 * length; floor(N/2) is k = 0 and x = 0. Unitary: noise keeps its level.
 */
export const inverseFft: FrameStage<Params> = {
  id: "inverse-fft",
  kind: "transform",
  summary: "k-space to image: centred, unitary, 1-D to 3-D, any length",
  schema,
  parse: (raw) => parseBySchema<Params>("inverse-fft", schema, raw),
  plan(layout) {
    const axes = SPATIAL_AXES.filter(
      (axis) => !layout.inImage.includes(axis) && axisLength(layout, axis) > 1,
    );
    return {
      layout: { ...layout, inImage: SPATIAL_AXES },
      physics: {
        axes: axes.map((axis) => `${axis} (${axisLength(layout, axis)})`).join(", ") || "none left",
      },
    };
  },
  run: (frame, _params, context) => toImage(frame, context),
};
