import { GYROMAGNETIC_RATIO_HZ_PER_T } from "./larmor.js";

/**
 * Off-resonance in Hz of the concomitant field of gradients at a point, lowest order:
 * `Bc = ((Gx^2 + Gy^2) z^2 + Gz^2 (x^2 + y^2) / 4 - Gx Gz x z - Gy Gz y z) / (2 B0)`, z along the main field.
 * Source: Bernstein et al. 1998, Magn Reson Med 39:300, doi:10.1002/mrm.1910390218 (symmetric gradients).
 * @param gradientTPerM along x, y, z
 * @param positionM from the isocentre
 */
export function concomitantOffsetHz(
  gradientTPerM: readonly [x: number, y: number, z: number],
  positionM: readonly [x: number, y: number, z: number],
  fieldT: number,
): number {
  const [gx, gy, gz] = gradientTPerM;
  const [x, y, z] = positionM;
  const square =
    (gx * gx + gy * gy) * z * z + (gz * gz * (x * x + y * y)) / 4 - gx * gz * x * z - gy * gz * y * z;
  return (GYROMAGNETIC_RATIO_HZ_PER_T * square) / (2 * fieldT);
}
