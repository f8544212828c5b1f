import { FLAG, type FlagName } from "../ingest/flags.js";
import { addNoise, RandomStream } from "../kernels/random.js";
import { noiseCovarianceFactor } from "../physics/noise-statistics.js";
import { type Acquisition, acquiredLines, acquiredSamples, centerSample } from "./acquisition.js";
import { sliceGeometry } from "./geometry.js";
import type { HeadValues, RawReadout } from "./raw-writer.js";
import { ExactKSpace, echoPhases, readoutSignal } from "./signal.js";

/**
 * Every readout in the order of acquisition: noise readouts, then repetitions, averages, lines, slices (in their
 * order), echoes. The noise of a readout depends on the seed and on all readouts before it.
 */
export function* acquire(a: Acquisition): Generator<RawReadout> {
  const random = RandomStream.fromSeed(a.seed);
  const base = headOfEveryReadout(a);
  let scanCounter = 0;
  for (let i = 0; i < a.noise.readouts; i++) {
    yield noiseReadout(a, { ...base, ...directions(a, 0), scan_counter: scanCounter++ }, random);
  }
  const kSpace = new ExactKSpace(a);
  const phases = a.echoTimesSeconds.map((_, echo) => echoPhases(a, echo));
  for (const counters of imageCounters(a)) {
    const { slice, contrast, kspace_encode_step_1: line } = counters;
    const phase = phases[contrast]!; // one for each contrast
    const samples = readoutSignal(kSpace.line(slice, line, contrast), phase, a.coils);
    if (a.noise.factor) addNoise(samples, a.noise.factor, a.coils, random);
    const head: HeadValues = {
      ...base,
      ...directions(a, slice),
      scan_counter: scanCounter++,
      flags: flagBits(imageFlags(a, counters)),
      number_of_samples: acquiredSamples(a),
      center_sample: centerSample(a, contrast),
      sample_time_us: a.dwellSeconds * 1e6,
      ...Object.fromEntries(Object.entries(counters).map(([name, value]) => [`idx.${name}`, value])),
    };
    yield { head, samples: Float32Array.from(samples) };
  }
}

interface Counters {
  readonly repetition: number;
  readonly average: number;
  readonly kspace_encode_step_1: number;
  readonly slice: number;
  readonly contrast: number;
}

function* imageCounters(a: Acquisition): Generator<Counters> {
  for (let repetition = 0; repetition < a.repetitions; repetition++)
    for (let average = 0; average < a.averages; average++)
      for (let line = 0; line < acquiredLines(a); line++)
        for (const slice of a.sliceOrder)
          for (let contrast = 0; contrast < a.echoTimesSeconds.length; contrast++)
            yield { repetition, average, kspace_encode_step_1: line, slice, contrast };
}

/** First and last marks; of a slice they stand on its first and last readout in each average. */
function imageFlags(a: Acquisition, c: Counters): FlagName[] {
  const firstLine = c.kspace_encode_step_1 === 0;
  const lastLine = c.kspace_encode_step_1 === acquiredLines(a) - 1;
  const firstEcho = c.contrast === 0;
  const lastEcho = c.contrast === a.echoTimesSeconds.length - 1;
  const begins = firstLine && firstEcho && c.slice === a.sliceOrder[0] && c.average === 0;
  const ends = lastLine && lastEcho && c.slice === a.sliceOrder.at(-1) && c.average === a.averages - 1;
  const marks: Readonly<Partial<Record<FlagName, boolean>>> = {
    firstInStep1: firstLine,
    lastInStep1: lastLine,
    firstInSlice: firstLine && firstEcho,
    lastInSlice: lastLine && lastEcho,
    firstInRepetition: begins,
    lastInRepetition: ends,
    reverse: a.reversed[c.contrast] ?? false,
    lastInMeasurement: ends && c.repetition === a.repetitions - 1,
  };
  return FLAG_NAMES.filter((name) => marks[name]);
}

function noiseReadout(a: Acquisition, head: HeadValues, random: RandomStream): RawReadout {
  const { factor, samplesPerReadout, dwellSeconds, relativeReceiverNoiseBandwidth } = a.noise;
  const samples = new Float64Array(2 * a.coils * samplesPerReadout);
  const power = noiseCovarianceFactor(dwellSeconds, a.dwellSeconds, relativeReceiverNoiseBandwidth);
  if (factor) addNoise(samples, factor, a.coils, random, 1 / Math.sqrt(power));
  return {
    head: {
      ...head,
      flags: flagBits(["noise"]),
      number_of_samples: samplesPerReadout,
      sample_time_us: dwellSeconds * 1e6,
    },
    samples: Float32Array.from(samples),
  };
}

/** Members that are not named stay 0. */
function headOfEveryReadout(a: Acquisition): HeadValues {
  const mask = Array.from({ length: Math.ceil(a.coils / 64) }, (_, word) => {
    const bits = Math.min(64, a.coils - 64 * word);
    return (1n << BigInt(bits)) - 1n;
  });
  return {
    version: 1,
    measurement_uid: 1,
    available_channels: a.coils,
    active_channels: a.coils,
    channel_mask: mask,
  };
}

function directions(a: Acquisition, slice: number): HeadValues {
  const { positionMm, readDir, phaseDir, sliceDir } = sliceGeometry(a, slice);
  return { position: positionMm, read_dir: readDir, phase_dir: phaseDir, slice_dir: sliceDir };
}

const FLAG_NAMES = Object.keys(FLAG) as FlagName[]; // FLAG is a literal without other keys

function flagBits(names: readonly FlagName[]): bigint {
  return names.reduce((bits, name) => bits | (1n << BigInt(FLAG[name] - 1)), 0n);
}
