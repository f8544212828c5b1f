import { InputError } from "../errors.js";
import { FRAME_AXES, type FrameAxis } from "../physics/layout.js";
import type { Pose, ScanOverrides } from "../physics/scan.js";
import { ROLES, type Role, roleOf } from "./flags.js";
import type { EncodingHeader, RawHeader } from "./header.js";
import { checkPayload, frameCounter, runsBackward } from "./place.js";
import type { RawFile, ReadoutBlock } from "./raw-file.js";
import { COUNTERS, type Counter, type ReadoutHead } from "./record.js";

/** Lowest and highest value of a counter over the image readouts. */
export interface CounterRange {
  minimum: number;
  maximum: number;
}

/** Where the energy of the readouts of one polarity lies, by stored sample index. */
export interface CenterEvidence {
  /** Sum of |s|^2 by stored sample. */
  readonly energy: Float64Array;
  /** Stated centre sample, and whether all readouts of this polarity state the same. */
  stated: number;
  uniform: boolean;
  samples: number;
  /** Usable samples on either side of the stated centre, in the order of rising k: the furthest of all readouts. */
  below: number;
  above: number;
}

/** Readouts of one frame: which lines, and how often. */
export interface FrameLines {
  readonly counters: Readonly<Record<FrameAxis, number>>;
  /** Readouts by line, key `step_2 * 65536 + step_1`; all-zero readouts do not count. */
  readonly lines: Map<number, number>;
  /** All readouts, the all-zero ones too. */
  readouts: number;
}

/**
 * What the readouts of one encoding say, gathered in one pass over the file; it keeps no samples.
 * Its size depends on frames, lines and channels, not on the file.
 */
export class ScanIndex {
  readonly roles: Record<Role, number>;
  readonly ranges = {} as Record<Counter, CounterRange>;
  readonly frames = new Map<string, FrameLines>();
  readonly poses: (Pose | undefined)[] = [];
  readonly centers: { forward?: CenterEvidence; reverse?: CenterEvidence } = {};
  /** Sum of |s|^2 by step_1 counter. */
  readonly lineEnergy: number[] = [];
  /** Dwell times of the image readouts, seconds, in order of appearance. */
  readonly dwellSeconds: number[] = [];
  readonly polarity: { forward: number; reverse: number }[] = [];
  readonly otherEncodings = new Set<number>();
  channels = 0;
  allZero = 0;
  posesDiffer = false;
  /** Readouts, samples and dwell of the noise readouts, and sum n n^H. */
  noise: { readouts: number; samples: number; dwellSeconds: number; sum: Float64Array } | undefined;
  /** Sums over neighbouring lines at the stated centre: Re(s_l conj(s_l+1)), and |s_l||s_l+1|. */
  neighbours = { product: 0, magnitude: 0 };

  readonly #file: string;
  readonly #encoding: number;
  readonly #header: EncodingHeader;
  readonly #overrides: ScanOverrides;
  readonly #lastLine = new Map<string, { line: number; partition: number; vector: Float64Array }>();

  constructor(file: string, header: RawHeader, overrides: ScanOverrides) {
    this.#file = file;
    this.#encoding = overrides.encoding ?? 0;
    this.#overrides = overrides;
    const encoding = header.encodings[this.#encoding];
    if (!encoding)
      throw new InputError(
        { file, field: "encoding", value: this.#encoding },
        `the header has ${header.encodings.length}, numbered from 0`,
        "Choose another with --encoding",
      );
    this.#header = encoding;
    this.roles = Object.fromEntries(ROLES.map((role) => [role, 0])) as Record<Role, number>;
  }

  get encoding(): EncodingHeader {
    return this.#header;
  }

  /**
   * @param energyOf sum of |s|^2 over the channels by stored sample, channels rising, of readout i, if it is known
   * @throws InputError naming the readout that contradicts itself or the others
   */
  add(block: ReadoutBlock, energyOf?: (i: number) => Float64Array | undefined): void {
    block.heads.forEach((head, i) => {
      checkPayload(head, block.payloadFloats(i), this.#file);
      this.#checkHead(head);
      const role = roleOf(head, this.#header.calibrationMode);
      if (role !== "noise" && head.encodingSpace !== this.#encoding) {
        this.otherEncodings.add(head.encodingSpace);
        return;
      }
      this.roles[role]++;
      if (role === "noise") this.#addNoise(head, block.samples(i));
      if (role === "image") this.#addImage(head, block.samples(i), energyOf?.(i));
    });
  }

  #checkHead(head: ReadoutHead): void {
    const field = (name: string) => `readout ${head.row}: ${name}`;
    const given = this.#overrides.sampleTimeUs !== undefined;
    if (!given && (!(head.dwellSeconds > 0) || !Number.isFinite(head.dwellSeconds)))
      throw new InputError(
        { file: this.#file, field: field("sample_time_us"), value: head.dwellSeconds * 1e6 },
        "must be > 0",
        "Correct the file, or give scan: { sample-time-us } in the recipe",
      );
    if (head.channels < 1 || head.samples < 1)
      throw new InputError(
        {
          file: this.#file,
          field: field(head.channels < 1 ? "active_channels" : "number_of_samples"),
          value: 0,
        },
        "must be at least 1",
        "Correct the file",
      );
    if (this.channels === 0) this.channels = head.channels;
    if (head.channels !== this.channels)
      throw new InputError(
        { file: this.#file, field: field("active_channels"), value: head.channels },
        `must be ${this.channels}, as in the readouts before it`,
        "Export the file again with one set of channels",
      );
  }

  #addNoise(head: ReadoutHead, samples: Float32Array): void {
    const { channels } = head;
    const n = head.samples;
    this.noise ??= {
      readouts: 0,
      samples: 0,
      dwellSeconds: head.dwellSeconds,
      sum: new Float64Array(2 * channels * channels),
    };
    const { sum } = this.noise;
    for (let a = 0; a < channels; a++)
      for (let b = 0; b <= a; b++) {
        let re = 0;
        let im = 0;
        for (let j = 0, p = 2 * a * n, q = 2 * b * n; j < n; j++, p += 2, q += 2) {
          re += samples[p]! * samples[q]! + samples[p + 1]! * samples[q + 1]!;
          im += samples[p + 1]! * samples[q]! - samples[p]! * samples[q + 1]!;
        }
        if (!Number.isFinite(re + im)) this.#notFinite(head, samples);
        sum[2 * (a * channels + b)]! += re;
        sum[2 * (a * channels + b) + 1]! += im;
        if (a === b) continue;
        sum[2 * (b * channels + a)]! += re;
        sum[2 * (b * channels + a) + 1]! -= im;
      }
    this.noise.readouts++;
    this.noise.samples += n;
  }

  #addImage(head: ReadoutHead, samples: Float32Array, energy: Float64Array | undefined): void {
    const backward = runsBackward(head, this.#overrides.readoutPolarity);
    const total = this.#addEnergy(head, samples, backward, energy);
    this.#addRanges(head, backward);
    const counters = {} as Record<FrameAxis, number>;
    for (const axis of FRAME_AXES) counters[axis] = frameCounter(head, axis, this.#overrides.averageOver);
    const key = FRAME_AXES.map((axis) => counters[axis]).join();
    let frame = this.frames.get(key);
    if (!frame) {
      frame = { counters, lines: new Map(), readouts: 0 };
      this.frames.set(key, frame);
    }
    frame.readouts++;
    if (total === 0) {
      this.allZero++;
      return;
    }
    const step1 = head.counters.kspace_encode_step_1;
    this.lineEnergy[step1] = (this.lineEnergy[step1] ?? 0) + total;
    const line = head.counters.kspace_encode_step_2 * 65536 + step1;
    frame.lines.set(line, (frame.lines.get(line) ?? 0) + 1);
    this.#addNeighbour(key, head, samples);
  }

  /** Total energy of a readout; its energy by sample joins the evidence for the centre. */
  #addEnergy(
    head: ReadoutHead,
    samples: Float32Array,
    backward: boolean,
    known: Float64Array | undefined,
  ): number {
    const n = head.samples;
    const side = backward ? "reverse" : "forward";
    const first = head.discardPre;
    const last = n - head.discardPost;
    const before = head.centerSample - first;
    const after = last - 1 - head.centerSample;
    const [below, above] = backward ? [after, before] : [before, after];
    let evidence = this.centers[side];
    if (!evidence || evidence.energy.length < n) {
      const energy = new Float64Array(n);
      if (evidence) energy.set(evidence.energy);
      const fresh = { stated: head.centerSample, uniform: true, samples: n, below, above };
      evidence = { ...(evidence ?? fresh), energy };
      this.centers[side] = evidence;
    }
    if (evidence.stated !== head.centerSample || evidence.samples !== n) evidence.uniform = false;
    evidence.below = Math.max(evidence.below, below);
    evidence.above = Math.max(evidence.above, above);
    const own = known ?? sampleEnergy(samples, head.channels, n, first, last);
    const { energy } = evidence;
    let total = 0;
    for (let j = first; j < last; j++) {
      energy[j]! += own[j]!;
      total += own[j]!;
    }
    if (!Number.isFinite(total)) this.#notFinite(head, samples);
    return total;
  }

  #addRanges(head: ReadoutHead, backward: boolean): void {
    for (const name of COUNTERS) {
      const value = head.counters[name];
      const range = this.ranges[name];
      if (!range) this.ranges[name] = { minimum: value, maximum: value };
      else {
        if (value < range.minimum) range.minimum = value;
        if (value > range.maximum) range.maximum = value;
      }
    }
    if (!this.dwellSeconds.includes(head.dwellSeconds)) this.dwellSeconds.push(head.dwellSeconds);
    const { contrast, slice } = head.counters;
    this.polarity[contrast] ??= { forward: 0, reverse: 0 };
    this.polarity[contrast][backward ? "reverse" : "forward"]++;
    const pose = this.poses[slice];
    if (!pose) {
      const { positionMm, readDir, phaseDir, sliceDir } = head;
      this.poses[slice] = { positionMm, readDir, phaseDir, sliceDir };
    } else if (!samePose(pose, head)) this.posesDiffer = true;
  }

  /** Compare the centre sample of this line with that of the line before it, over all channels. */
  #addNeighbour(key: string, head: ReadoutHead, samples: Float32Array): void {
    const vector = new Float64Array(2 * head.channels);
    const at = Math.min(head.centerSample, head.samples - 1);
    for (let c = 0; c < head.channels; c++) {
      vector[2 * c] = samples[2 * (c * head.samples + at)]!;
      vector[2 * c + 1] = samples[2 * (c * head.samples + at) + 1]!;
    }
    const line = head.counters.kspace_encode_step_1;
    const partition = head.counters.kspace_encode_step_2;
    const before = this.#lastLine.get(key);
    if (before && before.partition === partition && Math.abs(before.line - line) === 1) {
      let product = 0;
      let a = 0;
      let b = 0;
      for (let i = 0; i < vector.length; i++) {
        product += vector[i]! * before.vector[i]!;
        a += vector[i]! ** 2;
        b += before.vector[i]! ** 2;
      }
      this.neighbours.product += product;
      this.neighbours.magnitude += Math.sqrt(a * b);
    }
    this.#lastLine.set(key, { line, partition, vector });
  }

  #notFinite(head: ReadoutHead, samples: Float32Array): never {
    const at = samples.findIndex((value) => !Number.isFinite(value));
    if (at < 0)
      throw new InputError(
        { file: this.#file, field: `readout ${head.row}` },
        "its samples overflow",
        "Scale the data down",
      );
    const channel = Math.floor(at / 2 / head.samples);
    const sample = Math.floor(at / 2) % head.samples;
    throw new InputError(
      {
        file: this.#file,
        field: `readout ${head.row}: channel ${channel}, sample ${sample}`,
        value: String(samples[at]),
      },
      "samples must be finite",
      "The file is damaged or was exported wrongly: export it again",
    );
  }
}

/** Sum of |s|^2 over the channels, channels rising, by sample from `first` to `last` - 1; the others are 0. */
function sampleEnergy(
  samples: Float32Array,
  channels: number,
  n: number,
  first: number,
  last: number,
): Float64Array {
  const energy = new Float64Array(n);
  for (let c = 0; c < channels; c++)
    for (let j = first, p = 2 * (c * n + first); j < last; j++, p += 2) {
      const re = samples[p]!;
      const im = samples[p + 1]!;
      energy[j]! += re * re + im * im;
    }
  return energy;
}

function samePose(a: Pose, b: ReadoutHead): boolean {
  const near = (p: readonly number[], q: readonly number[]) =>
    p.every((value, i) => Math.abs(value - q[i]!) < 1e-3);
  return (
    near(a.positionMm, b.positionMm) &&
    near(a.readDir, b.readDir) &&
    near(a.phaseDir, b.phaseDir) &&
    near(a.sliceDir, b.sliceDir)
  );
}

/** Index a whole file, block by block. `progress` hears the readouts done. */
export async function indexScan(
  raw: RawFile,
  overrides: ScanOverrides,
  options: { blockRows: number; progress?: (done: number) => void; signal?: AbortSignal },
): Promise<ScanIndex> {
  const index = new ScanIndex(raw.file, raw.header, overrides);
  for (let first = 0; first < raw.readouts; first += options.blockRows) {
    const count = Math.min(options.blockRows, raw.readouts - first);
    raw.readBlock(first, count, (block) => index.add(block));
    options.progress?.(first + count);
    // Between blocks the event loop breathes: signals and progress are heard while the library works synchronously.
    await new Promise((resolve) => setImmediate(resolve));
    options.signal?.throwIfAborted();
  }
  return index;
}
