import type { Ellipse } from "./ellipse.js";

/**
 * Numerical objects made of ellipses, so that their k-space is known exactly. Coordinates are in units of half the
 * object's size: the square from -1 to 1, x along read_dir, y along phase_dir.
 */
export const PHANTOMS = ["belfry", "disc", "shepp-logan", "shepp-logan-modified"] as const;
export type PhantomName = (typeof PHANTOMS)[number];

/** The two signals of a slice, told apart by their resonance. */
export interface Tissues {
  readonly water: readonly Ellipse[];
  readonly fat: readonly Ellipse[];
}

/**
 * The cut through a phantom at a height along slice_dir (units of half the object's size, 0 in the middle of the
 * stack). Infinitely thin: the slice thickness does not blur it.
 */
export function phantomSlice(name: PhantomName, height: number): Tissues {
  switch (name) {
    case "belfry":
      return belfry(height);
    case "disc":
      return { water: [ellipse(0, 0, 0.5, 0.5, 0, 1)], fat: [] };
    case "shepp-logan":
      return { water: sheppLogan(SHEPP_LOGAN_1974), fat: [] };
    case "shepp-logan-modified":
      return { water: sheppLogan(SHEPP_LOGAN_MODIFIED), fat: [] };
  }
}

/**
 * A bell cast in agar, cut across: a wall around softer gel, a clapper off the axis, three drops of oil in the gel;
 * beside it a vial of oil and a vial of water. It widens from crown (height 1) to mouth (height -1), so that every
 * slice differs, and has no symmetry, so that every flip and turn is seen.
 */
function belfry(height: number): Tissues {
  const flare = 1 - 0.4 * Math.tanh(2.5 * height);
  const bell = (x: number, y: number, a: number, b: number, degrees: number, intensity: number) =>
    ellipse(x * flare, y * flare, a * flare, b * flare, degrees, intensity);
  // Oil displaces the gel: each drop takes the gel's intensity away from the water and adds its own to the fat.
  const gel = 0.45;
  const drops = [
    { x: -0.18, y: 0.12, a: 0.13, b: 0.07, degrees: -20 },
    { x: 0.22, y: 0.24, a: 0.06, b: 0.06, degrees: 0 },
    { x: -0.06, y: -0.28, a: 0.04, b: 0.09, degrees: 40 },
  ];
  return {
    water: [
      bell(0.03, -0.02, 0.62, 0.56, 12, 1),
      bell(0.03, -0.02, 0.46, 0.42, 12, gel - 1),
      bell(0.2, -0.06, 0.11, 0.14, 25, 0.55),
      ...drops.map((d) => bell(d.x, d.y, d.a, d.b, d.degrees, -gel)),
      ellipse(0.72, -0.7, 0.05, 0.1, 0, 0.8),
    ],
    fat: [
      ...drops.map((d) => bell(d.x, d.y, d.a, d.b, d.degrees, 0.9)),
      ellipse(-0.74, -0.68, 0.08, 0.06, 0, 0.9),
    ],
  };
}

/** x, y, a, b, degrees of the head of Shepp and Logan 1974, IEEE Trans Nucl Sci 21:21. */
const SHEPP_LOGAN_SHAPES: readonly (readonly [number, number, number, number, number])[] = [
  [0, 0, 0.69, 0.92, 0],
  [0, -0.0184, 0.6624, 0.874, 0],
  [0.22, 0, 0.11, 0.31, -18],
  [-0.22, 0, 0.16, 0.41, 18],
  [0, 0.35, 0.21, 0.25, 0],
  [0, 0.1, 0.046, 0.046, 0],
  [0, -0.1, 0.046, 0.046, 0],
  [-0.08, -0.605, 0.046, 0.023, 0],
  [0, -0.605, 0.023, 0.023, 0],
  [0.06, -0.605, 0.023, 0.046, 0],
];
/** Intensities of the same paper. */
const SHEPP_LOGAN_1974 = [2, -0.98, -0.02, -0.02, 0.01, 0.01, 0.01, 0.01, 0.01, 0.01];
/** Intensities of higher contrast: Toft 1996, The Radon Transform: Theory and Implementation (PhD thesis, DTU). */
const SHEPP_LOGAN_MODIFIED = [1, -0.8, -0.2, -0.2, 0.1, 0.1, 0.1, 0.1, 0.1, 0.1];

function sheppLogan(intensities: readonly number[]): Ellipse[] {
  return SHEPP_LOGAN_SHAPES.map(([x, y, a, b, degrees], i) =>
    ellipse(x, y, a, b, degrees, intensities[i] ?? 0),
  );
}

function ellipse(x: number, y: number, a: number, b: number, degrees: number, intensity: number): Ellipse {
  return { x, y, a, b, degrees, intensity };
}
