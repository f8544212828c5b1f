import { UsageError } from "../errors.js";
import { foldedInAny } from "../kernels/displacement.js";
import type { Kernels } from "../kernels/kernels.js";
import { signalMask, withoutSpecks } from "../kernels/signal-mask.js";
import {
  planUndisplace,
  type UndisplaceOptions,
  type Undisplacer,
  undisplaceLengths,
} from "../kernels/undisplace.js";
import { planUndisplaceColumns } from "../kernels/undisplace-columns.js";
import { cropStart } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import {
  columnsInView,
  cropRows,
  displacementMmPerHz,
  EchoFrame,
  echoSecondsOf,
  mapLayout,
  rounded,
  signedPixelBandwidthHz,
} from "./echo-frame.js";
import { FieldValues, FOLDED, fieldMapPlans, refuseSecondField } from "./field-values.js";
import { checkMap, givenField } from "./given-field.js";
import { parseBySchema } from "./parameters.js";
import {
  axisLength,
  type FrameStage,
  type InputArray,
  type Layout,
  type StageContext,
  withLength,
} from "./stage.js";

interface Params {
  /** `measured`, or the file of a map in Hz. */
  readonly field: string;
  readonly coordinates: "object" | "image";
  readonly jacobian: boolean;
  readonly "spin-echo": boolean;
  readonly along: "readout" | "phase";
  readonly "echo-spacing-ms"?: number;
  readonly "line-order": "ascending" | "descending";
}

const schema = {
  type: "object",
  additionalProperties: false,
  properties: {
    field: {
      description:
        "measured: by an earlier stage; or a .npy of Hz over the image's field of view, [y, x] or [slice, y, x]",
      type: "string",
      default: "measured",
    },
    coordinates: {
      description: "of a given map: where the spins are (object), or where they are seen (image)",
      enum: ["object", "image"],
      default: "object",
    },
    jacobian: {
      description: "correct intensity where pixels were stretched or squeezed",
      type: "boolean",
      default: true,
    },
    "spin-echo": {
      description: "the field's phase is refocused at the echo time",
      type: "boolean",
      default: false,
    },
    along: {
      description: "the direction that the field displaces along",
      enum: ["readout", "phase"],
      default: "readout",
    },
    "echo-spacing-ms": {
      description: "time from one line of an echo train to the next, for along: phase",
      type: "number",
      exclusiveMinimum: 0,
    },
    "line-order": {
      description: "of an echo train in time, for along: phase",
      enum: ["ascending", "descending"],
      default: "ascending",
    },
  },
};

const MEASURED = "measured";

/**
 * Put every pixel back that the field has displaced: pixel x of the object is read from the image at
 * `x + field / pixelBandwidth` (the sign by each echo's direction of reading; along y by the line order in time), with
 * band-limited interpolation of the complex channel images, times the Jacobian, so that sums along a line are kept.
 * The phase that the field has left is taken off for the interpolation and put back. What the readout's margin holds
 * (`fit-matrix: { readout-margin: keep }`) comes back; the result has the reconstructed field of view. Where the map folds,
 * pixels are 0 and counted.
 *
 * Source: Jezzard and Balaban 1995, Magn Reson Med 34:65; phase: Maeda, Sano, Yokoyama 1988, IEEE Trans Med Imaging 7:26.
 */
export const undisplace: FrameStage<Params> = {
  id: "undisplace",
  kind: "series",
  summary: "put pixels back that an off-resonance field has displaced",
  schema,
  parse(raw) {
    const params = parseBySchema<Params>("undisplace", schema, raw);
    if (params.along === "phase" && params["echo-spacing-ms"] === undefined)
      throw new UsageError(
        { field: "undisplace.echo-spacing-ms" },
        "is needed for along: phase",
        "Give the time from one line to the next",
      );
    if (params.along === "phase" && params.field === MEASURED)
      throw new UsageError(
        { field: "undisplace.field", value: MEASURED },
        "is measured for displacement along the readout",
        "For along: phase give a map, a .npy of Hz",
      );
    if (params.field === MEASURED || params.field.endsWith(".npy")) return params;
    throw new UsageError(
      { field: "undisplace.field", value: params.field },
      "must be measured or a .npy file",
      "Save the map in Hz with numpy.save",
    );
  },
  files: ({ field }) => (field === MEASURED ? [] : [field]),
  plan(layout, params, scan, { arrays, maps }) {
    if (!layout.axes.includes("coil") || layout.inImage.length < 3)
      throw new UsageError(
        { field: "undisplace" },
        "needs the images of single channels",
        "Put inverse-fft before it",
      );
    const map = arrays.get(params.field);
    if (map) {
      refuseSecondField("undisplace", maps);
      checkMap(map, layout, scan);
    } else if (!maps.some(({ name }) => name === "field-hz"))
      throw new UsageError(
        { field: "undisplace.field", value: MEASURED },
        "no stage before it measures a field",
        "Add field-map or separate-fat-water, or give a .npy file",
      );
    if (!params["spin-echo"]) echoSecondsOf("undisplace", scan);
    const columns = columnsInView(layout, scan);
    const output = mapLayout(layout, scan);
    return {
      layout: { ...withLength(layout, "x", columns), fovMm: output.fovMm },
      ...(map && { maps: fieldMapPlans(output, false) }),
      transformLengths: undisplaceLengths(...sizesAlong(params, layout, columns)),
      workBytes: 24 * axisLength(layout, "y") * axisLength(layout, "x"),
      physics: {
        along: params.along === "readout" ? "x" : "y",
        "bandwidth per pixel, Hz": Array.from({ length: scan.lengths.contrast }, (_, echo) =>
          rounded(perPixelHz(params, layout, scan, echo)),
        ).join(", "),
        ...(map && resampled(map, layout, columns)),
        "margin on each side, px": Math.floor((axisLength(layout, "x") - columns) / 2),
        intensity: params.jacobian ? "times the Jacobian" : "as it is",
      },
    };
  },
  run(frame, params, context) {
    const images = new EchoFrame(frame);
    const { scan } = context;
    const columns = columnsInView(frame.layout, scan);
    const layout = { ...withLength(frame.layout, "x", columns), fovMm: mapLayout(frame.layout, scan).fovMm };
    const size = images.rows * columns;
    const map = context.arrays.get(params.field);
    const field = map
      ? givenField(
          map,
          { ...params, pixelHz: perPixelHz(params, frame.layout, scan, 0) },
          images,
          columns,
          context,
        )
      : context.emitted("field-hz")!;
    const out = context.allocate((frame.data.length / images.columns) * columns);
    const mask = new Float32Array(field.length);
    const result = new EchoFrame({ ...frame, data: out, layout });
    let foldedCount = 0;
    for (let slice = 0; slice < images.slices; slice++)
      for (let z = 0; z < images.partitions; z++) {
        const at = (slice * images.partitions + z) * size;
        const fieldHz = field.subarray(at, at + size);
        const job = { images, result, slice, z, fieldHz, layout: frame.layout };
        const plan = undisplaceImage(job, params, context);
        if (!plan) continue;
        const folded = foldedOf(plan, job, params, scan);
        if (!map && !folded.includes(1)) continue;
        const object = objectSeen(job, params, scan, frame.noise.whitened ? frame.noise.gain : 0);
        for (let i = 0; i < size; i++) {
          mask[at + i] = object[i]! & (1 - folded[i]!);
          foldedCount += object[i]! & folded[i]!;
        }
      }
    if (context.counters.contrast === 0) {
      context.note({ name: FOLDED, value: foldedCount });
      if (map) {
        const values = new FieldValues(field.length, false);
        values.set(0, field, mask);
        values.emit(context, mmPerHz(params, frame.layout, scan));
      }
    }
    return { ...frame, data: out, layout };
  },
};

/** One image of every echo and channel, and where it goes. */
interface ImageJob {
  readonly images: EchoFrame;
  readonly result: EchoFrame;
  readonly slice: number;
  readonly z: number;
  readonly fieldHz: Float32Array;
  readonly layout: Layout;
}

/** @returns the plan of the first echo, if that is among them */
function undisplaceImage(
  { images, result, slice, z, fieldHz, layout }: ImageJob,
  params: Params,
  context: StageContext,
): Undisplacer | undefined {
  const planned = new Map<string, Undisplacer>();
  let first: Undisplacer | undefined;
  for (let echo = 0; echo < images.echoes; echo++) {
    const counter = images.echoes > 1 ? echo : context.counters.contrast;
    const plan = planFor(planned, params, fieldHz, images, layout, context.scan, counter);
    for (let coil = 0; coil < images.coils; coil++) {
      const [from, to] = [images.image(echo, slice, coil, z), result.image(echo, slice, coil, z)];
      applyPlan(plan, params, context.kernels, images, from, to);
    }
    if (counter > 0) continue;
    first = plan;
    context.note({ name: "places displaced out of what was acquired", value: plan.outsideCount });
  }
  return first;
}

/** Pixels of the object, [y, columns in view]: those that are seen above the background in the first echo, where the field has put them. */
function objectSeen(
  { images, slice, z, fieldHz, layout }: ImageJob,
  params: Params,
  scan: ScanFacts,
  noise: number,
) {
  const { rows, columns: wide } = images;
  const seen = withoutSpecks(signalMask(coilImages(images, 0, slice, z), OBJECT_SHARE, noise), {
    slices: 1,
    rows,
    columns: wide,
  });
  const columns = fieldHz.length / rows;
  const margin = cropStart(wide, columns);
  const hz = perPixelHz(params, layout, scan, 0);
  const within = (place: number, length: number) => Math.min(length - 1, Math.max(0, Math.round(place)));
  return Uint8Array.from(fieldHz, (field, i) => {
    const [y, x] = [Math.floor(i / columns), (i % columns) + margin];
    const [row, column] = params.along === "readout" ? [y, x + field / hz] : [y + field / hz, x];
    return seen[within(row, rows) * wide + within(column, wide)]!;
  });
}

/** Pixels that lie on others in the image of any echo. */
function foldedOf(plan: Undisplacer, { images, fieldHz, layout }: ImageJob, params: Params, scan: ScanFacts) {
  const hz = Array.from({ length: scan.lengths.contrast }, (_, echo) =>
    perPixelHz(params, layout, scan, echo),
  );
  // Along the phase direction there is one bandwidth for all.
  if (hz.every((value) => value === hz[0])) return plan.folded;
  return foldedInAny(fieldHz, hz, images.rows, fieldHz.length / images.rows);
}

/** Physics of a plan whose given map has another matrix than the images. */
export const RESAMPLED = "map interpolated";

function resampled({ shape }: InputArray, layout: Layout, columns: number): Record<string, string> {
  const [from, to] = [shape.slice(-2), [axisLength(layout, "y"), columns]].map((size) => size.join(" x "));
  return from === to ? {} : { [RESAMPLED]: `from ${from} to ${to} pixels` };
}

/** Pixels above this share of the bright level are the object. */
const OBJECT_SHARE = 0.1;

/** Rows, and pixels of a row before and after, of the images as they are put back: turned where y is displaced. */
function sizesAlong({ along }: Params, layout: Layout, columns: number): [number, number, number] {
  const rows = axisLength(layout, "y");
  return along === "readout" ? [rows, axisLength(layout, "x"), columns] : [columns, rows, rows];
}

/** Hz from one pixel to the next along the direction of displacement, signed. */
function perPixelHz(params: Params, layout: Layout, scan: ScanFacts, echo: number): number {
  if (params.along === "readout") return signedPixelBandwidthHz("undisplace", layout, scan, echo);
  const lineSeconds = (params["echo-spacing-ms"]! * 1e-3) / scan.acceleration.y;
  const hz = layout.fovMm.y / axisLength(layout, "y") / (scan.encoded.fovMm.y * lineSeconds);
  return params["line-order"] === "descending" ? -hz : hz;
}

/** Displacement along the readout, or along an echo train. */
function mmPerHz(params: Params, layout: Layout, scan: ScanFacts): number {
  if (params.along === "readout") return displacementMmPerHz(layout, scan);
  return layout.fovMm.y / axisLength(layout, "y") / perPixelHz(params, layout, scan, 0);
}

/** The plan of an echo; those displaced alike, at the same time, share one. */
function planFor(
  planned: Map<string, Undisplacer>,
  params: Params,
  fieldHz: Float32Array,
  images: EchoFrame,
  layout: Layout,
  scan: ScanFacts,
  echo: number,
): Undisplacer {
  const hz = perPixelHz(params, layout, scan, echo);
  const echoSeconds = params["spin-echo"] ? 0 : echoSecondsOf("undisplace", scan)[echo]!;
  const key = `${hz} ${echoSeconds}`;
  const known = planned.get(key);
  if (known) return known;
  const options: UndisplaceOptions = {
    displacementPixels: fieldHz.map((value) => value / hz),
    jacobian: params.jacobian,
    ...(echoSeconds !== 0 && { accrued: { fieldHz, echoSeconds } }),
  };
  const plan =
    params.along === "readout"
      ? planUndisplace(images.rows, images.columns, options)
      : planUndisplaceColumns(fieldHz.length / images.rows, images.rows, options);
  planned.set(key, plan);
  return plan;
}

function applyPlan(
  plan: Undisplacer,
  params: Params,
  { transform }: Kernels,
  images: EchoFrame,
  image: Float32Array,
  target: Float32Array,
): void {
  let source = image;
  if (params.along === "phase") {
    source = new Float32Array(target.length);
    cropRows(image, images.columns, target.length / (2 * images.rows), source);
  }
  plan.apply(transform, source, target);
}

function coilImages(images: EchoFrame, echo: number, slice: number, z: number): Float32Array[] {
  return Array.from({ length: images.coils }, (_, coil) => images.image(echo, slice, coil, z));
}
