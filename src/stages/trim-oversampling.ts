import { cropStart, type Extent } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { parseBySchema } from "./parameters.js";
import { axisLength, type Layout, type ReadoutStage, withLength } from "./stage.js";

type Params = Record<string, never>;

const schema = { type: "object", additionalProperties: false, properties: {} };

/** Pixels that remain of `encoded` when the readout's field of view is cropped to the reconstructed one. */
export function trimmedLength(scan: ScanFacts): number {
  const { encoded, reconstructed } = scan;
  return Math.min(encoded.matrix.x, Math.round((encoded.matrix.x * reconstructed.fovMm.x) / encoded.fovMm.x));
}

/**
 * Remove the readout oversampling: centred unitary transform of the encoded readout, then crop about floor(N/2) to
 * round(N x FOV_rec / FOV_enc), changing no value. The readout stays in image space; a stage that needs its k-space
 * transforms it back. The bandwidth per pixel, `1 / (encoded samples x dwell)`, does not change.
 */
export const trimOversampling: ReadoutStage<Params> = {
  id: "trim-oversampling",
  kind: "readout",
  summary: "crop the readout to the reconstructed field of view",
  schema,
  parse: (raw) => parseBySchema<Params>("trim-oversampling", schema, raw),
  plan(layout, _params, scan) {
    const length = axisLength(layout, "x");
    const kept = trimmedLength(scan);
    const fovX = (layout.fovMm.x * kept) / length;
    return {
      layout: {
        ...withLength(layout, "x", kept),
        fovMm: { ...layout.fovMm, x: fovX },
        inImage: [...layout.inImage, "x"],
        acquired: { ...layout.acquired, x: scaledExtent(layout.acquired.x, length, kept) },
      } satisfies Layout,
      physics: {
        "samples kept": `${cropStart(length, kept)} to ${cropStart(length, kept) + kept - 1} of ${length}`,
        "oversampling removed": Number((length / kept).toPrecision(6)),
      },
    };
  },
  run(lines, _params, context) {
    const { coils, samples } = lines;
    const kept = trimmedLength(context.scan);
    const out = context.allocate(2 * lines.lines * coils * kept);
    context.kernels.transform.transformAxis({
      source: lines.data,
      target: out,
      outer: lines.lines * coils,
      inner: 1,
      length: samples,
      outputLength: kept,
      inverse: true,
    });
    return { ...lines, data: out, samples: kept };
  },
};

/** The acquired extent on the coarser k-space grid of a cropped image: the same reach in cycles per mm. */
export function scaledExtent(extent: Extent, length: number, kept: number): Extent {
  const scale = kept / length;
  const center = Math.floor(length / 2);
  const newCenter = Math.floor(kept / 2);
  return {
    first: Math.max(0, Math.ceil((extent.first - center) * scale - 1e-9) + newCenter),
    last: Math.min(kept - 1, Math.floor((extent.last - center) * scale + 1e-9) + newCenter),
  };
}
