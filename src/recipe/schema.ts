import { FRAME_AXES } from "../physics/layout.js";
import { STAGES } from "../stages/registry.js";

/** Version of the recipe that this program reads and writes; another major version is refused. */
export const RECIPE_VERSION = 1;

/** The recipe's `scan`: which part of the file, and what its header may get wrong. The only home of the defaults. */
export const scanSchema = {
  type: "object",
  additionalProperties: false,
  properties: {
    group: { type: "string", description: "raw group of the file, where there are several" },
    encoding: { type: "integer", minimum: 0, default: 0, description: "encoding of the header, from 0" },
    duplicates: {
      enum: ["mean", "last"],
      default: "mean",
      description: "what becomes of a line acquired more than once",
    },
    "average-over": {
      type: "array",
      items: { enum: [...FRAME_AXES] },
      uniqueItems: true,
      default: [],
      description: "axes whose readouts are averaged into one image, besides averages",
    },
    "sample-time-us": { type: "number", exclusiveMinimum: 0, description: "dwell time, microseconds" },
    "resonance-hz": {
      type: "number",
      exclusiveMinimum: 0,
      description: "resonance frequency of water protons, Hz",
    },
    "echo-ms": {
      type: "array",
      items: { type: "number", minimum: 0 },
      minItems: 1,
      description: "echo times, ms, one for each echo; default: the header's",
    },
    "receiver-noise-bandwidth": {
      type: "number",
      exclusiveMinimum: 0,
      description: "relative to 1 / dwell time",
    },
    "readout-polarity": {
      enum: ["header", "forward", "reverse", "alternate"],
      default: "header",
      description: "which readouts run backward: as flagged, none, all, or every line with an odd counter",
    },
    centre: {
      enum: ["header", "measured"],
      default: "header",
      description: "sample at k = 0: stated, or where the energy peaks",
    },
    conjugate: {
      type: "boolean",
      default: false,
      description: "turn round data whose phase runs in the other sense",
    },
    "alternate-sign": {
      type: "boolean",
      default: false,
      description: "change the sign of every second line",
    },
    "recentre-mm": {
      type: "array",
      items: { type: "number" },
      minItems: 3,
      maxItems: 3,
      default: [0, 0, 0],
      description: "point (read, phase, slice; mm) that becomes the centre of the image",
    },
  },
} as const;

/** The recipe's `outputs`: how pictures look. */
export const outputsSchema = {
  type: "object",
  additionalProperties: false,
  properties: {
    pictures: { type: "boolean", default: true, description: "write PNG pictures beside the arrays" },
    "grey-low": { type: "number", description: "value shown black; default: 0" },
    "grey-high": {
      type: "number",
      description: "value shown white; default: a percentile of the pixels shown",
    },
    "png-bits": { enum: [8, 16], default: 8, description: "bits per pixel of grey pictures" },
    "tile-limit": { type: "integer", minimum: 1, default: 64, description: "most images in one picture" },
  },
} as const;

/** JSON Schema (draft 2020-12) of a whole recipe; the stages come from their registry. */
export function recipeSchema(): object {
  return {
    $schema: "https://json-schema.org/draft/2020-12/schema",
    title: "Carillon recipe",
    type: "object",
    additionalProperties: false,
    required: ["carillon", "stages"],
    properties: {
      carillon: { const: RECIPE_VERSION },
      scan: scanSchema,
      stages: {
        type: "array",
        minItems: 1,
        items: {
          anyOf: [
            { enum: STAGES.map((stage) => stage.id) },
            ...STAGES.map((stage) => ({
              type: "object",
              description: stage.summary,
              additionalProperties: false,
              required: [stage.id],
              properties: { [stage.id]: { anyOf: [stage.schema, { type: "null" }] } },
            })),
          ],
        },
      },
      outputs: outputsSchema,
    },
  };
}
