import type { Xyz } from "./layout.js";
import type { Pose } from "./scan.js";

/**
 * 4 x 4 matrix, row by row, that carries pixel indices (x, y, z, 1) to millimetres in patient coordinates (LPS), pixel
 * centres. Index floor(N/2) of each axis lies at the pose's position.
 * @param pixelMm size of a pixel along read_dir, phase_dir and slice_dir
 * @param matrix  pixels along each
 */
export function affineLps(pose: Pose, pixelMm: Xyz, matrix: Xyz): number[] {
  const columns = [
    pose.readDir.map((cosine) => cosine * pixelMm.x),
    pose.phaseDir.map((cosine) => cosine * pixelMm.y),
    pose.sliceDir.map((cosine) => cosine * pixelMm.z),
  ];
  const centre = [matrix.x, matrix.y, matrix.z].map((length) => Math.floor(length / 2));
  const rows = [0, 1, 2].map((row) => {
    const step = columns.map((column) => column[row]!);
    const origin = step.reduce(
      (position, size, axis) => position - size * centre[axis]!,
      pose.positionMm[row]!,
    );
    return [...step, origin];
  });
  return [...rows.flat(), 0, 0, 0, 1];
}

/** The pose of an image whose centre was moved by `moveMm` along read, phase and slice direction. */
export function movedPose(pose: Pose, moveMm: readonly [number, number, number]): Pose {
  const positionMm = pose.positionMm.map(
    (value, i) =>
      value + moveMm[0] * pose.readDir[i]! + moveMm[1] * pose.phaseDir[i]! + moveMm[2] * pose.sliceDir[i]!,
  );
  return { ...pose, positionMm };
}
