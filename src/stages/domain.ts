import { SPATIAL_AXES, type SpatialAxis } from "../physics/layout.js";
import { axisLength, type Frame, type StageContext, strideAbout } from "./stage.js";

/** The frame with these axes in k-space: those that are in image space already are transformed back, in place. */
export function toKSpace(frame: Frame, axes: readonly SpatialAxis[], context: StageContext): Frame {
  return transformAxes(
    frame,
    axes.filter((axis) => frame.layout.inImage.includes(axis)),
    false,
    context,
  );
}

/** The frame with all spatial axes in image space. */
export function toImage(frame: Frame, context: StageContext): Frame {
  // The slow axes first: columns before rows is the faster order, as each pass leaves the cache to the next.
  const axes = (["z", "y", "x"] as const).filter((axis) => !frame.layout.inImage.includes(axis));
  return transformAxes(frame, axes, true, context);
}

function transformAxes(
  frame: Frame,
  axes: readonly SpatialAxis[],
  inverse: boolean,
  context: StageContext,
): Frame {
  for (const axis of axes) {
    const length = axisLength(frame.layout, axis);
    if (length === 1) continue;
    const { outer, inner } = strideAbout(frame.layout, axis);
    context.kernels.transform.transformAxis({
      source: frame.data,
      target: frame.data,
      outer,
      inner,
      length,
      inverse,
    });
  }
  const before = frame.layout.inImage;
  const inImage = SPATIAL_AXES.filter((axis) => (axes.includes(axis) ? inverse : before.includes(axis)));
  return { ...frame, layout: { ...frame.layout, inImage } };
}
