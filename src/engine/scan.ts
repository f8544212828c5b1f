import { findDiscrepancies } from "../ingest/discrepancies.js";
import type { RawHeader } from "../ingest/header.js";
import { DEFAULT_BLOCK_ROWS, RawFile } from "../ingest/raw-file.js";
import { scanFacts } from "../ingest/scan-facts.js";
import { indexScan, type ScanIndex } from "../ingest/scan-index.js";
import { DEFAULT_OVERRIDES, type Discrepancy, type ScanFacts, type ScanOverrides } from "../physics/scan.js";

/** A raw file after one pass over it: what it states, what it holds, and where the two differ. */
export interface Scan {
  readonly file: string;
  readonly group: string;
  readonly readouts: number;
  readonly header: RawHeader;
  readonly index: ScanIndex;
  readonly facts: ScanFacts;
  readonly discrepancies: readonly Discrepancy[];
}

export interface ReadOptions {
  /** What the header may get wrong, as in a recipe's `scan`. */
  readonly overrides?: Partial<ScanOverrides>;
  readonly group?: string;
  readonly encoding?: number;
  /** Readouts held in memory at a time; it changes no result. */
  readonly blockRows?: number;
  readonly signal?: AbortSignal;
  readonly progress?: (done: number, total: number) => void;
}

/**
 * Read a raw file's header and every readout's head, check them against each other, and keep no samples.
 * @throws InputError naming file, place, value, rule and mend
 */
export async function readScan(file: string, options: ReadOptions = {}): Promise<Scan> {
  const overrides = completeOverrides(options);
  const raw = await RawFile.open(file, overrides.group);
  try {
    return await indexRaw(raw, overrides, options);
  } finally {
    raw.close();
  }
}

/** The overrides with defaults filled in; `group` and `encoding` beside them come first. */
export function completeOverrides(
  options: Pick<ReadOptions, "overrides" | "group" | "encoding">,
): ScanOverrides {
  const overrides = { ...DEFAULT_OVERRIDES, ...options.overrides };
  const group = options.group ?? overrides.group;
  return {
    ...overrides,
    ...(group !== undefined && { group }),
    encoding: options.encoding ?? overrides.encoding ?? 0,
  };
}

/** Index an open file as a whole. */
export async function indexRaw(raw: RawFile, overrides: ScanOverrides, options: ReadOptions): Promise<Scan> {
  const index = await indexScan(raw, overrides, {
    blockRows: options.blockRows ?? DEFAULT_BLOCK_ROWS,
    ...(options.signal && { signal: options.signal }),
    progress: (done) => options.progress?.(done, raw.readouts),
  });
  return scanOf(raw, index, overrides);
}

/** What a finished index says of a file. */
export function scanOf(raw: RawFile, index: ScanIndex, overrides: ScanOverrides): Scan {
  const { file, header, group, readouts } = raw;
  const facts = scanFacts(file, header, index, overrides);
  const discrepancies = findDiscrepancies(header, index, facts);
  return { file, group, readouts, header, index, facts, discrepancies };
}
