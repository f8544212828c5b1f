import { Ajv, type ErrorObject } from "ajv";
import { UsageError } from "../errors.js";
import { nearest } from "./nearest.js";

// Our own schemas need no check at run time (a test compiles them strictly), nor optimised code for a single use.
const ajv = new Ajv({
  useDefaults: true,
  strict: false,
  validateSchema: false,
  meta: false,
  code: { optimize: false },
});
const compiled = new WeakMap<object, ReturnType<Ajv["compile"]>>();

/**
 * Check a value against a JSON Schema and fill in its defaults; the input is not changed.
 * @param place how errors name the value, as in `stages: apodize`
 * @throws UsageError naming the key, its value, the rule, and for an unknown key the nearest valid one
 */
export function parseBySchema<P>(place: string, schema: object, raw: unknown, file?: string): P {
  const validate = compiled.get(schema) ?? ajv.compile(schema);
  compiled.set(schema, validate);
  const value = structuredClone(raw ?? {});
  if (validate(value)) return value as P;
  throw schemaError(place, schema, validate.errors![0]!, value, file);
}

function schemaError(
  place: string,
  schema: object,
  error: ErrorObject,
  value: unknown,
  file?: string,
): UsageError {
  const path = error.instancePath.slice(1).split("/").filter(Boolean);
  const field = [place, ...path].join(".");
  if (error.keyword === "additionalProperties") {
    const key = String(error.params.additionalProperty);
    const known = Object.keys((schemaAt(schema, path) as { properties?: object }).properties ?? {});
    const mend = known.length
      ? `${didYouMean(key, known)}Known: ${known.join(", ")}`
      : "It takes no parameters";
    return new UsageError({ file, field: `${field}.${key}` }, "unknown key", mend);
  }
  const found = path.reduce<unknown>((inner, key) => (inner as Record<string, unknown>)?.[key], value);
  if (error.keyword === "enum") {
    const allowed = (error.params.allowedValues as unknown[]).map(String);
    return new UsageError(
      { file, field, value: found },
      `must be one of ${allowed.join(", ")}`,
      didYouMean(String(found), allowed).trim(),
    );
  }
  if (error.keyword === "required")
    return new UsageError({ file, field: `${field}.${error.params.missingProperty}` }, "is required", "");
  return new UsageError({ file, field, value: found }, error.message ?? "is not allowed", "");
}

function didYouMean(word: string, known: readonly string[]): string {
  const guess = nearest(word, known);
  return guess === undefined ? "" : `Did you mean ${guess}? `;
}

function schemaAt(schema: object, path: readonly string[]): object {
  return path.reduce<object>((inner, key) => {
    const { properties, items } = inner as { properties?: Record<string, object>; items?: object };
    return properties?.[key] ?? items ?? {};
  }, schema);
}
