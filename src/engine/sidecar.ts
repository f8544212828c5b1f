import process from "node:process";
import { affineLps, movedPose } from "../physics/geometry.js";
import { SPATIAL_AXES } from "../physics/layout.js";
import type { Pose } from "../physics/scan.js";
import type { Recipe } from "../recipe/recipe.js";
import { axisLength } from "../stages/stage.js";
import { HDF5_VERSION, VERSION } from "../version.js";
import type { Placement } from "./placement.js";
import { type Plan, pixelSizeMm } from "./plan.js";
import { readoutFacts } from "./readout-facts.js";
import type { Scan } from "./scan.js";

/** Version of the sidecar; another major version is refused when it is read again. */
export const SIDECAR_VERSION = 1;

export const CAUTION =
  "For research only, not for diagnosis or treatment. Positions and intensities depend on the header being true. " +
  "Follow licensed practice and your institution's rules.";

export interface SidecarParts {
  readonly scan: Scan;
  readonly plan: Plan;
  /** The recipe as it was resolved: file, settings and defaults together. */
  readonly recipe: Recipe;
  readonly inputSha256: string;
  readonly inputBytes: number;
  readonly inputName: string;
  readonly noise: { readonly whitened: boolean; readonly smallest: number; readonly largest: number };
  readonly placement: Placement;
  /** The transform engine that ran. */
  readonly transform: "simd" | "plain";
  readonly arrays: readonly object[];
  readonly pictures: readonly object[];
  readonly outputs: readonly object[];
}

/** What stands beside the outputs: how each pixel came about and where it lies. No times, so runs can be compared. */
export function sidecar(parts: SidecarParts): object {
  const { scan, plan, recipe, noise } = parts;
  const { result } = plan;
  return {
    sidecar: SIDECAR_VERSION,
    program: "carillon",
    versions: {
      carillon: VERSION,
      h5wasm: HDF5_VERSION,
      node: process.versions.node,
      transform: parts.transform,
    },
    caution: CAUTION,
    input: { file: parts.inputName, bytes: parts.inputBytes, sha256: parts.inputSha256, group: scan.group },
    arrays: parts.arrays,
    pictures: parts.pictures,
    geometry: {
      frame: "patient coordinates, LPS, mm",
      orientation:
        "x increases to the right along read_dir, y downward along phase_dir; arrays are [.., y, x]",
      pixelSizeMm: pixelSizeMm(result),
      pixelCentre: "index floor(N/2) of each axis lies at the slice's position",
      slices: scan.facts.sliceOrder.map((slice) => slicePlace(scan, plan, slice)),
      sliceOrder: "by position along slice_dir; arrays keep the order of the counters",
    },
    noise: {
      unit: noise.whitened
        ? "standard deviation of the noise in each real and imaginary part of a channel, times gain"
        : "as stored in the file; gain is against the noise of one stored sample",
      gain: { smallest: noise.smallest, largest: noise.largest },
    },
    placement: parts.placement,
    scan: readoutFacts(scan),
    discrepancies: scan.discrepancies,
    recipe,
    inputArrays: plan.stages.flatMap(({ arrays }) =>
      [...arrays.values()].map(({ file, shape, sha256 }) => ({ file, shape, sha256 })),
    ),
    stages: plan.stages.map(({ stage, params, input, output, physics }) => ({
      id: stage.id,
      parameters: params,
      axes: output.axes,
      shapeIn: input.shape,
      shapeOut: output.shape,
      physics,
    })),
    outputs: parts.outputs,
  };
}

function slicePlace(scan: Scan, plan: Plan, slice: number): object {
  const stored = scan.facts.poses[slice];
  if (!stored) return { slice, acquired: false };
  const pose: Pose = movedPose(stored, scan.facts.overrides.recentreMm);
  const [x, y, z] = SPATIAL_AXES.map((axis) => axisLength(plan.result, axis)) as [number, number, number];
  return {
    slice,
    positionMm: pose.positionMm,
    readDir: pose.readDir,
    phaseDir: pose.phaseDir,
    sliceDir: pose.sliceDir,
    affineLps: affineLps(pose, pixelSizeMm(plan.result), { x, y, z }),
  };
}
