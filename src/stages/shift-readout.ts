import { UsageError } from "../errors.js";
import { shiftLines } from "../kernels/shift.js";
import { bandwidthPerPixelHz } from "../physics/bandwidth.js";
import { chemicalShiftHz, FAT_MAIN_PEAK_PPM } from "../physics/chemical-shift.js";
import type { ScanFacts } from "../physics/scan.js";
import { parseBySchema } from "./parameters.js";
import type { ReadoutStage } from "./stage.js";

interface Params {
  /** Frequency of the spins that are to be put in their place: Hz, `"-3.4 ppm"`, `"-217 Hz"`, or `"fat"`. */
  readonly offset: number | string;
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    offset: {
      description: "frequency of what is to be put in its place: Hz, with a unit (-3.4 ppm), or fat",
      type: ["number", "string"],
      default: "fat",
    },
  },
};

/**
 * Move the image along the readout so that spins of one frequency offset lie where they are: a spin at `offset` Hz is
 * seen at `x + offset / bandwidthPerPixel` on a forward readout and at `x - ...` on a reversed one. Exact for any
 * fraction of a pixel (linear phase on k-space), and before the oversampling is trimmed, so that what was displaced
 * beyond the field of view comes back. Everything else moves by the same: what was in place is then out of it.
 *
 * Source: Bernstein, King and Zhou, Handbook of MRI Pulse Sequences; bandwidth per pixel is 1 / (encoded samples x dwell).
 */
export const shiftReadout: ReadoutStage<Params> = {
  id: "shift-readout",
  kind: "readout",
  summary: "put spins of one frequency offset (Hz, ppm or fat) in their place along x",
  schema,
  parse(raw) {
    const params = parseBySchema<Params>("shift-readout", schema, raw);
    offsetIn(params, 1);
    return params;
  },
  plan(layout, params, scan) {
    const offsetHz = offsetIn(params, scan.resonanceHz);
    const pixels = forwardShift(params, scan);
    return {
      layout,
      physics: {
        "offset, Hz": round(offsetHz),
        "bandwidth per pixel, Hz": round(perPixelHz(scan)),
        "shift on a forward readout, px": round(pixels),
        "shift on a forward readout, mm": round((pixels * scan.encoded.fovMm.x) / scan.encoded.matrix.x),
      },
    };
  },
  run(lines, params, context) {
    const forward = forwardShift(params, context.scan);
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
