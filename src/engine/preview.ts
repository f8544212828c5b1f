import type { RawFile } from "../ingest/raw-file.js";
import { scanFacts } from "../ingest/scan-facts.js";
import { ScanIndex } from "../ingest/scan-index.js";
import { FRAME_AXES } from "../physics/layout.js";
import type { ScanFacts, ScanOverrides } from "../physics/scan.js";

/** The readouts contradict what the header let expect: the file must be indexed as a whole first. */
export class Contradiction extends Error {
  override readonly name = "Contradiction";
}

/**
 * What the scan will turn out to be, from the header and the readouts up to the first image one, so that a file can be
 * reconstructed in the one pass that also indexes it. Undefined where these do not tell: no limits for the lines,
 * averages over other axes, or a centre to be measured.
 */
export function previewScan(
  raw: RawFile,
  overrides: ScanOverrides,
  blockRows: number,
): ScanFacts | undefined {
  const index = new ScanIndex(raw.file, raw.header, overrides);
  const { limits, encoded } = index.encoding;
  if (overrides.centre === "measured" || overrides.averageOver.length > 0) return undefined;
  if (encoded.matrix.y > 1 && !limits.kspace_encoding_step_1) return undefined;
  if (encoded.matrix.z > 1 && !limits.kspace_encoding_step_2) return undefined;
  for (let first = 0; first < raw.readouts && index.roles.image === 0; first += blockRows) {
    const count = Math.min(blockRows, raw.readouts - first);
    raw.readBlock(first, count, (block) => index.add(block));
  }
  if (index.roles.image === 0) return undefined;
  for (const axis of FRAME_AXES) if (!limits[axis]) index.ranges[axis] = { minimum: 0, maximum: 0 };
  return {
    ...scanFacts(raw.file, raw.header, index, overrides),
    averages: (limits.average?.maximum ?? 0) + 1,
  };
}

/** Readouts of a group that the limits let expect: every line, in every average. */
export function previewReadouts(scan: ScanFacts, raw: RawFile, framesPerGroup: number): number {
  const { limits } = raw.header.encodings[scan.encoding]!;
  const lines = (name: "kspace_encoding_step_1" | "kspace_encoding_step_2") => {
    const limit = limits[name];
    return limit ? limit.maximum - limit.minimum + 1 : 1;
  };
  return lines("kspace_encoding_step_1") * lines("kspace_encoding_step_2") * scan.averages * framesPerGroup;
}

/** @throws Contradiction where what was foreseen and what was found would give other pixels */
export function confirmPreview(foreseen: ScanFacts, found: ScanFacts): void {
  const what = (scan: ScanFacts) =>
    JSON.stringify([
      scan.lengths,
      scan.center,
      scan.acquired,
      scan.channels,
      scan.dwellSeconds,
      scan.resonanceHz,
      scan.relativeReceiverNoiseBandwidth,
      scan.noise && [scan.noise.dwellSeconds, [...scan.noise.covariance]],
    ]);
  if (what(foreseen) !== what(found))
    throw new Contradiction("the readouts are not what the header let expect");
}
