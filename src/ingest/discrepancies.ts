import { GYROMAGNETIC_RATIO_HZ_PER_T } from "../physics/larmor.js";
import { FRAME_AXES, frameCount } from "../physics/layout.js";
import type { Discrepancy, ScanFacts } from "../physics/scan.js";
import { type Coverage, coverageOf } from "./coverage.js";
import type { RawHeader } from "./header.js";
import { measuredCenter } from "./scan-facts.js";
import type { ScanIndex } from "./scan-index.js";

/** Field strength is often a nominal value ("1.5"): a small difference to the frequency is only remarked, a large one is a fault. */
const NOMINAL_FIELD_TOLERANCE = 1e-4;
const WRONG_FIELD_TOLERANCE = 1e-2;

/** Every difference between what the header states and what the readouts hold, in a fixed order. */
export function findDiscrepancies(header: RawHeader, index: ScanIndex, scan: ScanFacts): Discrepancy[] {
  const found: Discrepancy[] = [];
  const problem = (code: string, message: string) => found.push({ code, severity: "problem", message });
  const remark = (code: string, message: string) => found.push({ code, severity: "remark", message });
  checkHeader(header, scan, problem, remark);
  checkLimits(index, scan, problem, remark);
  checkReadouts(index, scan, problem, remark);
  checkCenters(index, scan, problem);
  checkLines(coverageOf(index, scan), scan, problem, remark);
  checkFrames(index, scan, problem);
  return found;
}

/** Counters of the readouts, and what encodingLimits calls them. */
const LIMIT_OF = [
  ["kspace_encode_step_1", "kspace_encoding_step_1"],
  ["kspace_encode_step_2", "kspace_encoding_step_2"],
  ["average", "average"],
  ...FRAME_AXES.map((axis) => [axis, axis] as const),
] as const;

type Say = (code: string, message: string) => void;

function checkHeader(header: RawHeader, scan: ScanFacts, problem: Say, remark: Say): void {
  if (scan.fieldT !== undefined) {
    const statedHz = scan.fieldT * GYROMAGNETIC_RATIO_HZ_PER_T;
    const difference = scan.resonanceHz / statedHz - 1;
    const say = Math.abs(difference) > WRONG_FIELD_TOLERANCE ? problem : remark;
    if (Math.abs(difference) > NOMINAL_FIELD_TOLERANCE)
      say(
        "field-against-frequency",
        `field strength ${scan.fieldT} T means ${mhz(statedHz)} MHz, the header states ${mhz(scan.resonanceHz)} MHz ` +
          `(${(100 * difference).toFixed(2)} %); ppm are converted with the stated frequency`,
      );
  }
  if (header.encodings.length > 1)
    remark(
      "several-encodings",
      `the header has ${header.encodings.length} encodings; this is number ${scan.encoding}`,
    );
  if (header.receiverChannels !== undefined && header.receiverChannels !== scan.channels)
    problem(
      "channels",
      `the header states ${header.receiverChannels} channels, the readouts have ${scan.channels}`,
    );
  if (
    scan.noise &&
    header.relativeReceiverNoiseBandwidth === undefined &&
    scan.overrides.receiverNoiseBandwidth === undefined
  )
    remark(
      "noise-bandwidth-not-given",
      "relativeReceiverNoiseBandwidth is not given; 1 is assumed, so noise levels may be off",
    );
}

function checkLimits(index: ScanIndex, scan: ScanFacts, problem: Say, remark: Say): void {
  const { limits } = index.encoding;
  const inferred = [
    ...FRAME_AXES.filter((axis) => !limits[axis] && scan.lengths[axis] > 1),
    ...(!limits.kspace_encoding_step_1 && scan.dimensions > 1 ? ["kspace_encoding_step_1"] : []),
    ...(!limits.kspace_encoding_step_2 && scan.dimensions > 2 ? ["kspace_encoding_step_2"] : []),
  ];
  for (const [counter, limit] of LIMIT_OF) {
    const stated = limits[limit]?.maximum;
    const { maximum } = index.ranges[counter];
    if (stated !== undefined && maximum > stated)
      problem("beyond-limits", `${counter} goes up to ${maximum}, encodingLimits up to ${stated}`);
  }
  if (inferred.length)
    remark("limits-inferred", `encodingLimits lacks ${inferred.join(", ")}; taken from the counters`);
}

function checkReadouts(index: ScanIndex, scan: ScanFacts, problem: Say, remark: Say): void {
  if (index.allZero)
    problem("all-zero-readouts", `${index.allZero} image readouts hold only zeros and count as not acquired`);
  if (index.posesDiffer)
    problem(
      "pose-differs",
      "position or directions differ within a slice; those of its first readout are used",
    );
  if (scan.polarity.includes("mixed") && scan.trajectory === "cartesian")
    remark(
      "mixed-polarity",
      "lines of both readout directions in one echo; each is turned round by its own flag",
    );
}

function checkCenters(index: ScanIndex, scan: ScanFacts, problem: Say): void {
  for (const side of ["forward", "reverse"] as const) {
    const evidence = index.centers[side];
    if (!evidence?.uniform) continue;
    const measured = measuredCenter(evidence);
    const allowed = Math.max(2, evidence.samples / 64);
    if (Math.abs(measured - evidence.stated) > allowed)
      problem(
        "center-sample",
        `${side} readouts: energy peaks at sample ${measured}, center_sample states ${evidence.stated}; ` +
          "scan: { centre: measured } uses the measured one (but a field that slopes across the object moves the peak too, " +
          "more in later echoes)",
      );
  }
  if (scan.dimensions > 1) {
    const peak = index.lineEnergy.reduce(
      (best, value, line) => (value > (index.lineEnergy[best] ?? 0) ? line : best),
      0,
    );
    if (Math.abs(peak - scan.center.y) > Math.max(2, scan.encoded.matrix.y / 64))
      problem(
        "center-line",
        `energy peaks at line ${peak}, encodingLimits states the centre ${scan.center.y}`,
      );
  }
  const { product, magnitude } = index.neighbours;
  if (magnitude > 0 && product / magnitude < -0.5 && !scan.overrides.alternateSign)
    problem(
      "alternating-sign",
      "neighbouring lines alternate in sign, which moves the image by half its field of view; " +
        "scan: { alternate-sign: true } undoes it",
    );
}

function checkLines(coverage: Coverage, scan: ScanFacts, problem: Say, remark: Say): void {
  const { y, z } = scan.acceleration;
  if (coverage.kind === "accelerated")
    problem(
      "accelerated",
      `accelerated (${y} x ${z}): ${coverage.missing} of ${coverage.expected} lines not acquired; they stay zero and the image aliases`,
    );
  else if (coverage.kind === "elliptical")
    remark(
      "elliptical",
      `elliptical coverage: ${coverage.missing} of ${coverage.expected} lines in the corners not acquired; they stay zero`,
    );
  else if (coverage.missing)
    problem(
      "missing-lines",
      `${coverage.missing} of ${coverage.expected} lines not acquired (first: ${coverage.firstGap}); they stay zero`,
    );
  for (const [axis, fraction] of Object.entries(coverage.partialFourier))
    if (fraction < 1)
      problem(
        "partial-fourier",
        `partial Fourier along ${axis}: ${(100 * fraction).toFixed(1)} % of a symmetric coverage; the missing part stays zero`,
      );
  if (coverage.duplicates)
    remark(
      "duplicate-lines",
      `${coverage.duplicates} lines more than the ${scan.averages} average(s); combined by ${scan.overrides.duplicates}`,
    );
}

function checkFrames(index: ScanIndex, scan: ScanFacts, problem: Say): void {
  const expected = frameCount(scan.lengths);
  const acquired = [...index.frames.values()].filter(({ lines }) => lines.size > 0).length;
  const missing = expected - acquired;
  if (missing > 0)
    problem("missing-frames", `${missing} of ${expected} images were never acquired; they are zero`);
}

function mhz(hz: number): string {
  return (hz * 1e-6).toFixed(6);
}
