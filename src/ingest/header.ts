import { XMLParser, XMLValidator } from "fast-xml-parser";
import { InputError } from "../errors.js";
import type { Xyz } from "../physics/layout.js";
import type { Space } from "../physics/scan.js";

/** Minimum, maximum and centre of a counter, as `encodingLimits` states them. */
export interface Limits {
  readonly minimum: number;
  readonly maximum: number;
  readonly center: number;
}

export const LIMIT_NAMES = [
  "kspace_encoding_step_1",
  "kspace_encoding_step_2",
  "average",
  "slice",
  "contrast",
  "phase",
  "repetition",
  "set",
  "segment",
] as const;
export type LimitName = (typeof LIMIT_NAMES)[number];

export interface EncodingHeader {
  readonly encoded: Space;
  readonly reconstructed: Space;
  readonly limits: Readonly<Partial<Record<LimitName, Limits>>>;
  readonly trajectory: string;
  readonly echoTrainLength: number | undefined;
  readonly acceleration: { readonly y: number; readonly z: number };
  readonly calibrationMode: string | undefined;
}

/** The part of the standard's XML header that this program uses, in SI units and mm. Nothing about the subject is kept. */
export interface RawHeader {
  readonly fieldT: number | undefined;
  readonly resonanceHz: number;
  readonly receiverChannels: number | undefined;
  readonly relativeReceiverNoiseBandwidth: number | undefined;
  readonly encodings: readonly EncodingHeader[];
  readonly echoTimesSeconds: readonly number[];
}

const MEND = "Correct the header or export the file again";

/**
 * Parse the XML header of a raw file; namespaces and prefixes do not matter, unknown elements are left alone.
 * @throws InputError naming the element that is missing or holds what it must not.
 */
export function parseHeader(text: string, file: string): RawHeader {
  const valid = XMLValidator.validate(text);
  if (valid !== true) {
    const where = `header, line ${valid.err.line}`;
    throw new InputError({ file, field: where }, `is not well-formed XML: ${valid.err.msg}`, MEND);
  }
  const parser = new XMLParser({
    removeNSPrefix: true,
    parseTagValue: false,
    ignoreAttributes: true,
    isArray: (name) => name === "encoding" || name === "TE",
  });
  const root = new Element(parser.parse(text).ismrmrdHeader, "header", file);
  if (root.absent) throw root.fault("must hold the element ismrmrdHeader");
  const system = root.child("acquisitionSystemInformation");
  const encodings = root.list("encoding").map(parseEncoding);
  if (encodings.length === 0) throw root.at("encoding").fault("is missing");
  return {
    fieldT: system.child("systemFieldStrength_T").positive(),
    resonanceHz: root.child("experimentalConditions").child("H1resonanceFrequency_Hz").required().positive()!,
    receiverChannels: system.child("receiverChannels").whole(1),
    relativeReceiverNoiseBandwidth: system.child("relativeReceiverNoiseBandwidth").positive(),
    encodings,
    echoTimesSeconds: root
      .child("sequenceParameters")
      .list("TE")
      .map((element) => element.number()! * 1e-3),
  };
}

function parseEncoding(encoding: Element): EncodingHeader {
  const parallel = encoding.child("parallelImaging");
  const multiband = parallel.child("multiband").child("multiband_factor");
  if ((multiband.number() ?? 1) > 1)
    throw multiband.fault("simultaneous multi-slice is not supported", "Separate the slices before");
  const factor = parallel.child("accelerationFactor");
  const limits: Partial<Record<LimitName, Limits>> = {};
  for (const name of LIMIT_NAMES) {
    const limit = encoding.child("encodingLimits").child(name);
    if (limit.absent) continue;
    const [minimum, maximum, center] = ["minimum", "maximum", "center"].map(
      (part) => limit.child(part).required().whole(0)!,
    ) as [number, number, number];
    if (maximum < minimum) throw limit.child("maximum").fault(`must not be below the minimum ${minimum}`);
    limits[name] = { minimum, maximum, center };
  }
  return {
    encoded: parseSpace(encoding.child("encodedSpace").required()),
    reconstructed: parseSpace(encoding.child("reconSpace").required()),
    limits,
    trajectory: encoding.child("trajectory").required().text().toLowerCase(),
    echoTrainLength: encoding.child("echoTrainLength").whole(0),
    acceleration: {
      y: factor.child("kspace_encoding_step_1").whole(1) ?? 1,
      z: factor.child("kspace_encoding_step_2").whole(1) ?? 1,
    },
    calibrationMode: parallel.child("calibrationMode").absent
      ? undefined
      : parallel.child("calibrationMode").text(),
  };
}

function parseSpace(space: Element): Space {
  const xyz = (element: Element, read: (axis: Element) => number): Xyz => ({
    x: read(element.child("x").required()),
    y: read(element.child("y").required()),
    z: read(element.child("z").required()),
  });
  return {
    matrix: xyz(space.child("matrixSize").required(), (axis) => axis.whole(1)!),
    fovMm: xyz(space.child("fieldOfView_mm").required(), (axis) => axis.positive()!),
  };
}

/** One element of the header, with the path by which errors name it. */
class Element {
  readonly #value: unknown;
  readonly #path: string;
  readonly #file: string;

  constructor(value: unknown, path: string, file: string) {
    this.#value = value;
    this.#path = path;
    this.#file = file;
  }

  get absent(): boolean {
    return this.#value === undefined;
  }

  child(name: string): Element {
    const value = this.#value;
    const inner =
      typeof value === "object" && value !== null ? (value as Record<string, unknown>)[name] : undefined;
    return new Element(inner, `${this.#path}/${name}`, this.#file);
  }

  at(name: string): Element {
    return new Element(undefined, `${this.#path}/${name}`, this.#file);
  }

  list(name: string): Element[] {
    const value = this.#value;
    const inner =
      typeof value === "object" && value !== null ? (value as Record<string, unknown>)[name] : undefined;
    if (!Array.isArray(inner)) return [];
    return inner.map((item, i) => new Element(item, `${this.#path}/${name} ${i}`, this.#file));
  }

  required(): this {
    if (this.absent) throw this.fault("is missing");
    return this;
  }

  text(): string {
    return typeof this.#value === "string" ? this.#value.trim() : "";
  }

  number(): number | undefined {
    if (this.absent) return undefined;
    const value = this.text() === "" ? Number.NaN : Number(this.text());
    if (!Number.isFinite(value)) throw this.fault("must be a number");
    return value;
  }

  positive(): number | undefined {
    const value = this.number();
    if (value !== undefined && !(value > 0)) throw this.fault("must be > 0");
    return value;
  }

  /** A whole number of at least `least`. */
  whole(least: number): number | undefined {
    const value = this.number();
    if (value !== undefined && (!Number.isInteger(value) || value < least))
      throw this.fault(`must be a whole number of at least ${least}`);
    return value;
  }

  fault(rule: string, mend = MEND): InputError {
    const value = this.absent || typeof this.#value === "object" ? undefined : this.text();
    return new InputError({ file: this.#file, field: this.#path, value }, rule, mend);
  }
}
