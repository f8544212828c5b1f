import { planUndisplace, type UndisplaceOptions, type Undisplacer } from "./undisplace.js";

/**
 * planUndisplace along columns (y) instead of rows: for readouts that are displaced along the phase direction, with
 * displacements in pixels of y, positive towards larger y; their sign is that of the line order in time.
 * @param columns     columns of the image
 * @param inputLength pixels of an image column
 * @param options     maps as [outputLength, columns]
 * @returns images [inputLength, columns] to [outputLength, columns]; `rows` counts the columns, `folded` is [outputLength, columns]
 */
export function planUndisplaceColumns(
  columns: number,
  inputLength: number,
  options: UndisplaceOptions,
): Undisplacer {
  const outputLength = options.displacementPixels.length / columns;
  const accrued = options.accrued && {
    fieldHz: transposed(options.accrued.fieldHz, outputLength, columns, 1),
    echoSeconds: options.accrued.echoSeconds,
  };
  const plan = planUndisplace(columns, inputLength, {
    displacementPixels: transposed(options.displacementPixels, outputLength, columns, 1),
    jacobian: options.jacobian,
    ...(accrued && { accrued }),
  });
  const folded = Uint8Array.from(transposed(Float32Array.from(plan.folded), columns, outputLength, 1));
  return {
    ...plan,
    folded,
    apply(engine, image, target) {
      const source = transposed(image, inputLength, columns, 2);
      const straight = new Float32Array(target.length);
      plan.apply(engine, source, straight);
      target.set(transposed(straight, columns, outputLength, 2));
    },
  };
}

/** [rows, columns] to [columns, rows], `floats` numbers per pixel. */
function transposed(map: Float32Array, rows: number, columns: number, floats: 1 | 2): Float32Array {
  const out = new Float32Array(map.length);
  for (let y = 0, from = 0; y < rows; y++) {
    for (let x = 0; x < columns; x++, from += floats) {
      const to = floats * (x * rows + y);
      out[to] = map[from]!;
      if (floats === 2) out[to + 1] = map[from + 1]!;
    }
  }
  return out;
}
