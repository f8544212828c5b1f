import type { AxisTransform } from "./transform.js";

/** The lengths of a transform with their defaults filled in: complex samples along the axis. */
export interface AxisLengths {
  readonly inputLength: number;
  readonly outputLength: number;
}

/**
 * Lengths of a transform job, checked against its arrays before a sample is touched.
 * @throws RangeError when a count is not a whole number, the input or output is longer than the transform, or an
 *   array does not hold exactly its [outer, length, inner] complex samples
 */
export function axisLengths(job: AxisTransform): AxisLengths {
  const { source, target, outer, inner, length } = job;
  const { inputLength = length, outputLength = length } = job;
  requireCount("outer", outer);
  requireCount("inner", inner);
  requireCount("length", length);
  requireCount("inputLength", inputLength);
  requireCount("outputLength", outputLength);
  if (inputLength > length)
    throw new RangeError(`inputLength ${inputLength} exceeds the transform's length ${length}`);
  if (outputLength > length)
    throw new RangeError(`outputLength ${outputLength} exceeds the transform's length ${length}`);
  requireFloats("source", source, 2 * outer * inputLength * inner);
  requireFloats("target", target, 2 * outer * outputLength * inner);
  if (source === target && inputLength !== outputLength) {
    throw new RangeError(`in place needs equal lengths; input has ${inputLength}, output ${outputLength}`);
  }
  return { inputLength, outputLength };
}

function requireCount(name: string, count: number): void {
  if (!Number.isInteger(count) || count < 1)
    throw new RangeError(`${name} is ${count}; must be a whole number >= 1`);
}

function requireFloats(name: string, array: Float32Array, floats: number): void {
  if (array.length !== floats) throw new RangeError(`${name} holds ${array.length} floats; needs ${floats}`);
}
