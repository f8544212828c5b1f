import { UsageError } from "../errors.js";
import { objectField, resampleMap } from "../kernels/displacement.js";
import type { ScanFacts } from "../physics/scan.js";
import type { EchoFrame } from "./echo-frame.js";
import { axisLength, type InputArray, type Layout, type StageContext } from "./stage.js";

/** What the pixels of a given map are, and how its field displaces. */
export interface GivenCoordinates {
  readonly coordinates: "object" | "image";
  readonly along: "readout" | "phase";
  /** Hz from one pixel to the next along that direction, signed. */
  readonly pixelHz: number;
}

/** @throws UsageError for a map whose axes are not those of the images */
export function checkMap({ file, shape }: InputArray, layout: Layout, scan: ScanFacts): void {
  const leading = shape.slice(0, -2).reduce((product, length) => product * length, 1);
  const partitions = axisLength(layout, "z");
  const images = scan.lengths.slice * partitions;
  if (shape.length < 2 || (leading !== 1 && leading !== images))
    throw new UsageError(
      { file, field: "shape", value: shape.join(" x ") },
      `must be [y, x], or [${partitions > 1 ? "z" : "slice"}, y, x] with ${images === 1 ? "one image" : `${images} images`}`,
      "Any matrix will do, one map for all images or one for each; it must cover the image's field of view",
    );
}

/** A given map on the grid of the images in the reconstructed field of view, object's coordinates, [slice, z, y, x]. */
export function givenField(
  map: InputArray,
  how: GivenCoordinates,
  images: EchoFrame,
  columns: number,
  { counters }: StageContext,
): Float32Array {
  const [rows, length] = map.shape.slice(-2) as [number, number]; // as checkMap has seen
  const size = images.rows * columns;
  const out = new Float32Array(images.slices * images.partitions * size);
  for (let slice = 0; slice < images.slices; slice++)
    for (let z = 0; z < images.partitions; z++) {
      const counter = images.slices > 1 ? slice : counters.slice;
      const isSingle = map.data.length === rows * length;
      const from = isSingle ? 0 : (counter * images.partitions + z) * rows * length;
      const given = map.data.subarray(from, from + rows * length);
      const resampled = resampleMap(given, rows, length, images.rows, columns);
      const field = how.coordinates === "object" ? resampled : toObject(how, resampled, images.rows, columns);
      out.set(field, (slice * images.partitions + z) * size);
    }
  return out;
}

/** A map in the coordinates of the displaced image carried to those of the object. */
function toObject({ along, pixelHz }: GivenCoordinates, map: Float32Array, rows: number, columns: number) {
  if (along === "readout") return objectField(map, rows, columns, pixelHz).fieldHz;
  const turned = objectField(transposed(map, rows, columns), columns, rows, pixelHz).fieldHz;
  return transposed(turned, columns, rows);
}

function transposed(map: Float32Array, rows: number, columns: number): Float32Array {
  return map.map((_, i) => map[(i % rows) * columns + Math.floor(i / rows)]!);
}
