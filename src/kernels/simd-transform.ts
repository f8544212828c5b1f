import { type AxisLengths, axisLengths } from "./axis-lengths.js";
import { SampleMemory, SamplePart, type SampleSource } from "./sample-memory.js";
import { createSimdLoops } from "./simd-loops.js";
import { SimdInstance, simdModule } from "./simd-module.js";
import { type Plan, PlanBook } from "./simd-plan.js";
import { PrivateRegion, type RegionPlace } from "./simd-region.js";
import type { AxisTransform, Loops, TransformEngine } from "./transform.js";

/** What another thread needs to build an engine on this memory; all of it can be posted. */
export interface SimdPlace extends RegionPlace {
  readonly module: WebAssembly.Module;
  readonly memory: WebAssembly.Memory;
  /** Bytes of the memory that the other thread may hand out with `allocate`; none by default. */
  readonly samplesStart?: number;
  readonly samplesBytes?: number;
}

/** Bytes of a complex64 sample. */
const SAMPLE = 8;
/** Room for some forty plans of matrix sizes; untouched pages cost nothing. */
const FIRST_REGION_BYTES = 1 << 22;

/** A transform between arrays, resolved: lengths known, plan written. */
interface Run extends AxisLengths {
  readonly job: AxisTransform;
  readonly plan: Plan;
  readonly gain: number;
}

/**
 * The SIMD engine: four lines at a time in WebAssembly, any length. A line's result depends on nothing but the line:
 * not on how many are transformed together, nor on where they lie.
 */
export class SimdEngine implements TransformEngine {
  readonly id = "simd";
  readonly loops: Loops;
  private readonly book: PlanBook;

  constructor(
    /** Shared with the other SIMD kernels of this thread. */
    readonly instance: SimdInstance,
    private readonly samples: SampleSource,
  ) {
    this.book = new PlanBook(instance.region);
    this.loops = createSimdLoops(instance, samples);
    instance.region.onEmptied(() => this.book.clear());
  }

  allocate(floats: number, zeroed?: boolean): Float32Array {
    return this.samples.allocate(floats, zeroed);
  }

  release(array: Float32Array): void {
    this.samples.release(array);
  }

  /**
   * Centred transform along the middle axis of [outer, length, inner]; see AxisTransform. Arrays outside the shared
   * memory are copied in and out, four lines at a time.
   * @throws RangeError when lengths and arrays do not fit together, or the private region is too small for the length
   */
  transformAxis(job: AxisTransform): void {
    const lengths = axisLengths(job);
    const plan = this.instance.region.withRoom(() => this.book.plan(job.length));
    const gain = (job.scale ?? 1) / Math.sqrt(job.length);
    const run = { job, plan, gain, ...lengths };
    const x = this.instance.locate(job.source);
    const y = this.instance.locate(job.target);
    if (x >= 0 && y >= 0) this.transformWithin(run, x, y);
    else this.transformOutside(run);
  }

  /** Both arrays lie in the memory, at the addresses x and y. */
  private transformWithin(run: Run, x: number, y: number): void {
    const { outer, inner } = run.job;
    const step = SAMPLE * inner;
    const xBlock = step * run.inputLength;
    const yBlock = step * run.outputLength;
    // Neighbouring lines in fours; what is left of them across the outer axis, if that makes fuller fours.
    const across = outer >= 4 || inner === 1 ? inner % 4 : 0;
    const along = inner - across;
    if (along > 0) {
      for (let o = 0; o < outer; o++)
        this.lines(run, x + o * xBlock, step, SAMPLE, y + o * yBlock, step, SAMPLE, along);
    }
    for (let i = along; i < inner; i++) {
      this.lines(run, x + SAMPLE * i, step, xBlock, y + SAMPLE * i, step, yBlock, outer);
    }
  }

  /** Either array lies elsewhere: through the plan's scratch, which is free before and after a transform. */
  private transformOutside(run: Run): void {
    const { inputLength, outputLength, plan } = run;
    const { source, target, outer, inner, length } = run.job;
    const x = plan.scratchB;
    const y = plan.endsInB ? plan.scratchA : plan.scratchB;
    const xStage = this.instance.region.floats(x, 8 * length);
    const yStage = this.instance.region.floats(y, 8 * length);
    const lines = outer * inner;
    for (let line = 0; line < lines; line += 4) {
      const count = Math.min(4, lines - line);
      for (let lane = 0; lane < count; lane++) {
        const o = Math.floor((line + lane) / inner);
        const first = o * inputLength * inner + ((line + lane) % inner);
        gather(source, first, inner, inputLength, xStage, lane * inputLength);
      }
      this.lines(run, x, SAMPLE, SAMPLE * inputLength, y, SAMPLE, SAMPLE * outputLength, count);
      for (let lane = 0; lane < count; lane++) {
        const o = Math.floor((line + lane) / inner);
        const first = o * outputLength * inner + ((line + lane) % inner);
        scatter(yStage, lane * outputLength, outputLength, target, first, inner);
      }
    }
  }

  private lines(
    run: Run,
    x: number,
    xStep: number,
    xLane: number,
    y: number,
    yStep: number,
    yLane: number,
    count: number,
  ): void {
    const { plan, inputLength, outputLength, job, gain } = run;
    this.instance.run.transformLines(
      plan.address,
      x,
      xStep,
      xLane,
      inputLength,
      y,
      yStep,
      yLane,
      outputLength,
      count,
      job.inverse,
      gain,
    );
  }
}

/**
 * The engine of this thread.
 * @param place the memory to allocate from (by default a new one), or what the thread that owns it has posted
 */
export function createSimdEngine(place: SampleMemory | SimdPlace = new SampleMemory()): SimdEngine {
  if (!(place instanceof SampleMemory)) {
    const { module, memory, samplesStart = 0, samplesBytes = 0 } = place;
    const region = new PrivateRegion(memory, place);
    return new SimdEngine(
      new SimdInstance(module, region),
      new SamplePart(memory, samplesStart, samplesBytes),
    );
  }
  let block = place.allocate(FIRST_REGION_BYTES / 4);
  const region = new PrivateRegion(place.memory, placeOf(block), (bytes) => {
    const larger = place.allocate(Math.ceil(bytes / 4));
    place.release(block);
    block = larger;
    return placeOf(block);
  });
  return new SimdEngine(new SimdInstance(simdModule(), region), place);
}

function placeOf(block: Float32Array): RegionPlace {
  return { regionStart: block.byteOffset, regionBytes: block.byteLength };
}

/** A strided line of `count` complex samples, from sample `first` on, to the adjacent samples from `to` on. */
function gather(
  source: Float32Array,
  first: number,
  stride: number,
  count: number,
  stage: Float32Array,
  to: number,
): void {
  if (stride === 1) {
    stage.set(source.subarray(2 * first, 2 * (first + count)), 2 * to);
    return;
  }
  for (let j = 0, from = 2 * first, at = 2 * to; j < count; j++, from += 2 * stride, at += 2) {
    stage[at] = source[from]!;
    stage[at + 1] = source[from + 1]!;
  }
}

/** The reverse: adjacent samples from `from` on to a strided line. */
function scatter(
  stage: Float32Array,
  from: number,
  count: number,
  target: Float32Array,
  first: number,
  stride: number,
): void {
  if (stride === 1) {
    target.set(stage.subarray(2 * from, 2 * (from + count)), 2 * first);
    return;
  }
  for (let j = 0, at = 2 * from, to = 2 * first; j < count; j++, at += 2, to += 2 * stride) {
    target[to] = stage[at]!;
    target[to + 1] = stage[at + 1]!;
  }
}
