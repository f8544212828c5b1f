import { UsageError } from "../errors.js";
import { frameCount } from "../physics/layout.js";
import type { ScanFacts } from "../physics/scan.js";
import { axisLength, type Frame, type Layout, type NoiseState } from "../stages/stage.js";
import { groupCounters, groupFrames, groupOf, type Plan } from "./plan.js";
import type { GroupResult } from "./reconstruct.js";
import { type PlannedRecipe, type RunOptions, run } from "./run.js";
import { samePixel } from "./same-place.js";
import type { Scan } from "./scan.js";

/** One of the recipes that are compared. */
export interface Variant {
  readonly name: string;
  /** The recipe worked out for what the scan is. */
  prepare(facts: ScanFacts): PlannedRecipe;
}

export interface CompareOptions extends RunOptions {
  /** Most images that differences are measured on, evenly spread. */
  readonly mostImages: number;
  /** Which of these the edge, the regions and the pictures are of; the middle one if left out. */
  readonly image?: number;
  readonly replicaCount?: number;
  readonly seed?: number;
}

/** A partition of a frame, by its index in the first variant: what one picture shows. */
export interface ImagePlace {
  readonly frame: number;
  readonly z: number;
}

/** One variant, reconstructed. */
export interface VariantImages extends PlannedRecipe {
  readonly name: string;
  /** Magnitudes, [y, x] each, of the chosen images. */
  readonly images: readonly Float32Array[];
  readonly height: number;
  readonly width: number;
  /** Complex images of the channels of the shown image, [coil, y, x]. */
  readonly channels: Float32Array;
  readonly coils: number;
  readonly noise: NoiseState;
  /** Noise of the shown image over pseudo-replicas. */
  readonly deviation: Float32Array | undefined;
  /** Of the stages that are its own, summed over threads. */
  readonly seconds: number;
}

export interface Compared {
  readonly scan: Scan;
  readonly variants: readonly VariantImages[];
  readonly places: readonly ImagePlace[];
  /** Index of the shown image among them. */
  readonly shown: number;
  readonly imagesInAll: number;
  /** Passes over the file: one for each set of readout stages. */
  readonly passes: number;
}

/**
 * Reconstruct the variants of a recipe. Those with the same readout stages share a pass over the file, and in it the
 * stages that they begin with; the images are those of each recipe alone, to the bit.
 * @throws UsageError, InputError as `run`
 */
export async function reconstructVariants(
  file: string,
  variants: readonly Variant[],
  options: CompareOptions,
): Promise<Compared> {
  const done = new Map<string, VariantImages>();
  let waiting = [...variants];
  let passes = 0;
  let last: { scan: Scan; choice: ImageChoice } | undefined;
  let choice: ImageChoice | undefined; // of all variants, whichever pass they are in
  while (waiting.length) {
    const ready = waiting;
    let joined: Variant[] = [];
    const { replicaCount, seed = 1 } = options;
    const result = await run(
      file,
      {
        ...options,
        keepCoils: (facts, plan, group) => shownPart(facts, plan, choice!).group === group,
        ...(replicaCount !== undefined && {
          replicas: {
            count: replicaCount,
            seed,
            groups: (facts: ScanFacts, plan: Plan) => new Set([shownPart(facts, plan, choice!).group]),
          },
        }),
      },
      (facts) => {
        const all = variants.map((variant) => ({ variant, ...variant.prepare(facts) }));
        choice = chooseImages(
          facts,
          all.map(({ plan }) => plan.result),
          options,
        );
        const planned = all.filter(({ variant }) => ready.includes(variant));
        const key = passKey(planned[0]!.plan);
        const together = planned.filter(({ plan }) => passKey(plan) === key);
        joined = together.map(({ variant }) => variant);
        const [first, ...others] = together;
        return { plan: first!.plan, recipe: first!.recipe, variants: others };
      },
      (facts, planned) => new Collecting(facts, planned, choice!),
    );
    const { scan, attempt } = result;
    joined.forEach((variant, v) => void done.set(variant.name, attempt.finished(v, variant.name)));
    waiting = ready.filter((variant) => !joined.includes(variant));
    last = { scan, choice: attempt.choice };
    passes++;
  }
  const { scan, choice: chosen } = last!;
  return {
    scan,
    variants: variants.map(({ name }) => done.get(name)!),
    places: chosen.places,
    shown: chosen.shown,
    imagesInAll: chosen.inAll,
    passes,
  };
}

/** What must be alike for plans to share a pass over the file. */
function passKey({ stages, together, drift }: Plan): string {
  const readout = stages.filter(({ stage }) => stage.kind === "readout");
  return JSON.stringify([
    readout.map(({ stage, params }) => [stage.id, params]),
    together,
    drift !== undefined,
  ]);
}

interface ImageChoice {
  readonly places: readonly ImagePlace[];
  readonly shown: number;
  readonly inAll: number;
  /** The result of the first variant, whose partitions `places` count. */
  readonly first: Layout;
}

/**
 * Images that every variant has, evenly spread.
 * @param results of the variants; the first one's partitions count
 * @throws UsageError for an image that there is not
 */
function chooseImages(
  facts: ScanFacts,
  results: readonly Layout[],
  { mostImages, image }: CompareOptions,
): ImageChoice {
  const [first] = results as [Layout];
  const partitions = axisLength(first, "z");
  const inAll = frameCount(facts.lengths) * partitions;
  const isCommon = (index: number) =>
    results.every((result) => samePixel(index % partitions, "z", first, result) !== undefined);
  const common = Array.from({ length: inAll }, (_, index) => index).filter(isCommon);
  if (image !== undefined && !common.includes(image))
    throw new UsageError(
      { field: "--image", value: image },
      image < inAll ? "a variant does not reach so far along z" : `there are ${inAll} images, from 0`,
      "Choose one of them",
    );
  const count = Math.min(common.length, mostImages);
  const chosen = Array.from(
    { length: count },
    (_, i) => common[Math.floor(((i + 0.5) * common.length) / count)]!,
  );
  if (image !== undefined && !chosen.includes(image)) chosen[0] = image;
  const shown = image === undefined ? Math.floor(count / 2) : chosen.indexOf(image);
  const places = chosen.map((index) => ({ frame: Math.floor(index / partitions), z: index % partitions }));
  return { places, shown, inAll, first };
}

/** The group and the place in it of the shown image's frame. */
function shownPart(facts: ScanFacts, plan: Plan, { places, shown }: ImageChoice) {
  return groupOf(facts, plan.together, places[shown]!.frame);
}

/** Keeps the chosen images of every variant while groups finish in any order. */
class Collecting {
  readonly choice: ImageChoice;
  readonly #facts: ScanFacts;
  readonly #planned: readonly PlannedRecipe[];
  readonly #images: Float32Array[][];
  readonly #kept: { channels: Float32Array; deviation: Float32Array | undefined }[] = [];
  readonly #noise: NoiseState[] = [];
  readonly #seconds: number[];

  constructor(facts: ScanFacts, planned: PlannedRecipe, choice: ImageChoice) {
    this.#facts = facts;
    this.#planned = [planned, ...(planned.variants ?? [])];
    this.choice = choice;
    this.#images = this.#planned.map(() => []);
    this.#seconds = this.#planned.map(() => 0);
  }

  async use(group: number, results: readonly GroupResult[]): Promise<void> {
    const { plan } = this.#planned[0]!;
    const frames = groupFrames(this.#facts, plan, group);
    results.forEach((result, v) => {
      this.#noise[v] = result.result.noise;
      this.#seconds[v]! += result.seconds;
      this.choice.places.forEach(({ frame, z: partition }, i) => {
        const place = frames.indexOf(frame);
        const z = samePixel(partition, "z", this.choice.first, result.result.layout)!;
        if (place >= 0)
          this.#images[v]![i] = magnitudeOf(result.result, place * axisLength(result.result.layout, "z") + z);
        if (place >= 0 && i === this.choice.shown) this.#kept[v] = this.#shownOf(result, place, z);
      });
    });
  }

  #shownOf({ result, coils, deviation }: GroupResult, place: number, z: number) {
    const size = imageSize(result);
    const at = place * axisLength(result.layout, "z") + z;
    return {
      channels: channelsOf(coils!, place, z),
      deviation: deviation?.slice(at * size, (at + 1) * size),
    };
  }

  abort(): void {
    for (const images of this.#images) images.length = 0;
  }

  finished(v: number, name: string): VariantImages {
    const { plan, recipe } = this.#planned[v]!;
    const { result } = plan;
    const size = axisLength(result, "y") * axisLength(result, "x");
    const blank = () => new Float32Array(size);
    return {
      name,
      plan,
      recipe,
      // an image without a single readout has no group
      images: this.choice.places.map((_, i) => this.#images[v]![i] ?? blank()),
      height: axisLength(result, "y"),
      width: axisLength(result, "x"),
      channels: this.#kept[v]?.channels ?? new Float32Array(2 * size * axisLength(plan.coils, "coil")),
      coils: axisLength(plan.coils, "coil"),
      noise: this.#noise[v] ?? { whitened: false, gain: 0 },
      deviation: this.#kept[v]?.deviation,
      seconds: this.#seconds[v]!,
    };
  }
}

function imageSize({ layout }: Frame): number {
  return axisLength(layout, "y") * axisLength(layout, "x");
}

/** One image [y, x] of a result, its magnitude. */
function magnitudeOf(frame: Frame, index: number): Float32Array {
  const size = imageSize(frame);
  if (frame.layout.kind === "real") return frame.data.slice(index * size, (index + 1) * size);
  const part = frame.data.subarray(2 * index * size, 2 * (index + 1) * size);
  return Float32Array.from({ length: size }, (_, i) => Math.hypot(part[2 * i]!, part[2 * i + 1]!));
}

/** [coil, y, x] of one partition of one frame. */
function channelsOf(frame: Frame, place: number, z: number): Float32Array {
  const size = 2 * imageSize(frame);
  const coils = axisLength(frame.layout, "coil");
  const partitions = axisLength(frame.layout, "z");
  const out = new Float32Array(coils * size);
  for (let c = 0; c < coils; c++) {
    const from = ((place * coils + c) * partitions + z) * size;
    out.set(frame.data.subarray(from, from + size), c * size);
  }
  return out;
}

/** Counters of an image's frame, from 0, in words: `echo 1 (TE 3.9 ms), slice 3`. */
export function imageLabel(facts: ScanFacts, { frame, z }: ImagePlace, partitions: number): string {
  const plan = { together: [] } as const;
  const counters = groupCounters(facts, plan, frame);
  const named = {
    repetition: "repetition",
    set: "set",
    phase: "phase",
    contrast: "echo",
    slice: "slice",
  } as const;
  const parts = (Object.keys(named) as (keyof typeof named)[])
    .filter((axis) => facts.lengths[axis] > 1)
    .map(
      (axis) =>
        `${named[axis]} ${counters[axis]}${axis === "contrast" ? echoTime(facts, counters[axis]) : ""}`,
    );
  if (partitions > 1) parts.push(`z ${z}`);
  return parts.join(", ") || "the image";
}

function echoTime({ echoTimesSeconds }: ScanFacts, echo: number): string {
  const seconds = echoTimesSeconds[echo];
  return seconds === undefined ? "" : ` (TE ${Number((seconds * 1e3).toPrecision(4))} ms)`;
}
