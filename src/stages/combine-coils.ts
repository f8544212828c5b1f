import { parseBySchema } from "./parameters.js";
import { axisLength, type FrameStage, type Layout, strideAbout } from "./stage.js";

interface Params {
  readonly method: "root-sum-of-squares";
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: { method: { enum: ["root-sum-of-squares"], default: "root-sum-of-squares" } },
};

/**
 * One image from all channels: the root of the sum of squares, sqrt(sum |I_c|^2), a real magnitude without phase.
 * A single channel passes unchanged, complex. Source: Roemer et al. 1990, Magn Reson Med 16:192.
 */
export const combineCoils: FrameStage<Params> = {
  id: "combine-coils",
  kind: "combine",
  summary: "one image from all channels; a single channel passes unchanged, complex",
  schema,
  parse: (raw) => parseBySchema<Params>("combine-coils", schema, raw),
  plan(layout, params) {
    const coils = axisLength(layout, "coil");
    return {
      layout: combinedLayout(layout),
      physics: { method: coils === 1 ? "one channel, passed on complex" : params.method, channels: coils },
    };
  },
  run(frame, _params, context) {
    const layout = combinedLayout(frame.layout);
    const { outer, length, inner } = strideAbout(frame.layout, "coil");
    if (length === 1) return { ...frame, layout };
    const out = context.allocate(outer * inner);
    context.kernels.rootSumOfSquares(frame.data, out, outer, length, inner);
    return { ...frame, data: out, layout };
  },
};

function combinedLayout(layout: Layout): Layout {
  const at = layout.axes.indexOf("coil");
  const without = <T>(list: readonly T[]) => list.filter((_, i) => i !== at);
  const kind = layout.shape[at] === 1 ? layout.kind : "real";
  return { ...layout, axes: without(layout.axes), shape: without(layout.shape), kind };
}
