import { UsageError } from "../errors.js";
import { demodulateLines, shiftLines } from "../kernels/shift.js";
import { bandwidthPerPixelHz } from "../physics/bandwidth.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM } from "../physics/chemical-shift.js";
import type { ScanFacts } from "../physics/scan.js";
import { parseBySchema } from "./parameters.js";
import type { ReadoutStage } from "./stage.js";

interface Params {
  /** Frequency of the spins that are to be put in their place: Hz, `"-3.4 ppm"`, `"-217 Hz"`, or `"fat"`. */
  readonly offset: number | string;
  /** `none`, `navigators`, or the file of a table of Hz. */
  readonly drift: string;
  readonly "spin-echo": boolean;
}

/** Readouts in between that only measure. */
const NAVIGATORS = "navigators";

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    offset: {
      description:
        "frequency of what is to be put in its place: Hz, with a unit (-3.4 ppm), or fat; by default fat, with a drift 0",
      type: ["number", "string"],
    },
    drift: {
      description:
        "frequency drift, taken off each readout: none, navigators, or a .npy of Hz, one for each image readout",
      type: "string",
      default: "none",
    },
    "spin-echo": {
      description: "the drift's phase is refocused at the echo time",
      type: "boolean",
      default: false,
    },
  },
};

/**
 * Move the image along the readout so that spins of one frequency offset lie where they are: a spin at `offset` Hz is
 * seen at `x + offset / bandwidthPerPixel` on a forward readout and at `x - ...` on a reversed one. Exact for any
 * fraction of a pixel (linear phase on k-space), and before the oversampling is trimmed, so that what was displaced
 * beyond the field of view comes back. Everything else moves by the same: what was in place is then out of it.
 * A drift of the resonance is taken off readout by readout, with the phase that it has left by the echo time.
 *
 * Source: Bernstein, King and Zhou, Handbook of MRI Pulse Sequences; bandwidth per pixel is 1 / (encoded samples x dwell).
 */
export const shiftReadout: ReadoutStage<Params> = {
  id: "shift-readout",
  kind: "readout",
  summary: "put spins of one frequency offset (Hz, ppm or fat) in their place along x",
  schema,
  parse(raw) {
    const given = parseBySchema<Omit<Params, "offset"> & Partial<Params>>("shift-readout", schema, raw);
    const params = { ...given, offset: given.offset ?? (given.drift === "none" ? "fat" : 0) };
    offsetIn(params, 1);
    if (["none", NAVIGATORS].includes(params.drift) || params.drift.endsWith(".npy")) return params;
    throw new UsageError(
      { field: "shift-readout.drift", value: params.drift },
      "must be none, navigators or a .npy file",
      "Save one number of Hz for each image readout with numpy.save",
    );
  },
  files: ({ drift }) => (drift.endsWith(".npy") ? [drift] : []),
  drift: ({ drift }) => (drift === "none" ? undefined : drift),
  plan(layout, params, scan) {
    if (
      params.drift !== "none" &&
      !params["spin-echo"] &&
      scan.echoTimesSeconds.length < scan.lengths.contrast
    )
      throw new UsageError(
        { field: "shift-readout.drift" },
        `the phase of a drift needs ${scan.lengths.contrast} echo times, the header has ${scan.echoTimesSeconds.length}`,
        "Give them: --set 'scan.echo-ms=[5]'",
      );
    const offsetHz = offsetIn(params, scan.resonanceHz);
    const pixels = forwardShift(params, scan);
    return {
      layout,
      physics: {
        "offset, Hz": round(offsetHz),
        "bandwidth per pixel, Hz": round(perPixelHz(scan)),
        "shift on a forward readout, px": round(pixels),
        "shift on a forward readout, mm": round((pixels * scan.encoded.fovMm.x) / scan.encoded.matrix.x),
        ...(params.drift !== "none" && { "drift taken off, from": params.drift }),
      },
    };
  },
  run(lines, params, context) {
    const { scan } = context;
    if (lines.driftHz)
      demodulateLines(
        lines.data.subarray(0, 2 * lines.lines * lines.coils * lines.samples),
        lines.samples,
        lines.coils,
        lines.driftHz,
        Float64Array.from(lines.echoes, (echo) => (params["spin-echo"] ? 0 : scan.echoTimesSeconds[echo]!)),
        Float64Array.from(lines.backward, (flag) => (flag ? -scan.dwellSeconds : scan.dwellSeconds)),
      );
    const forward = forwardShift(params, scan);
    if (forward === 0) return lines;
    const shifts = new Float64Array(lines.lines * lines.coils);
    for (let i = 0; i < shifts.length; i++)
      shifts[i] = lines.backward[Math.floor(i / lines.coils)] ? -forward : forward;
    lines.data.set(
      shiftLines(lines.data.subarray(0, 2 * shifts.length * lines.samples), lines.samples, shifts),
    );
    return lines;
  },
};

/** Pixels towards larger x that undo the displacement on a forward readout. */
function forwardShift(params: Params, scan: ScanFacts): number {
  return -offsetIn(params, scan.resonanceHz) / perPixelHz(scan) || 0; // no negative zero
}

function perPixelHz(scan: ScanFacts): number {
  return bandwidthPerPixelHz(scan.encoded.matrix.x, scan.dwellSeconds);
}

/** @throws UsageError for text that is no frequency */
function offsetIn({ offset }: Params, resonanceHz: number): number {
  if (typeof offset === "number") return offset;
  if (offset === "fat") return chemicalShiftHz(FAT_MAIN_PEAK_PPM, resonanceHz);
  const match = /^([-+]?[\d.]+(?:e[-+]?\d+)?)\s*(hz|ppm)$/i.exec(offset);
  const value = Number(match?.[1]);
  if (!match || !Number.isFinite(value))
    throw new UsageError(
      { field: "shift-readout.offset", value: offset },
      "must be fat, a number of Hz, or a number with Hz or ppm",
      "For example -217, -217 Hz, -3.4 ppm",
    );
  return match[2]!.toLowerCase() === "ppm" ? chemicalShiftHz(value, resonanceHz) : value;
}

function round(value: number): number {
  return Number(value.toPrecision(7));
}
