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
  const overrides: ScanOverrides = { ...DEFAULT_OVERRIDES, ...options.overrides };
  const group = options.group ?? overrides.group;
  const chosen = { ...overrides, encoding: options.encoding ?? overrides.encoding ?? 0 };
  const raw = await RawFile.open(file, group);
  try {
    const index = await indexScan(raw, chosen, {
      blockRows: options.blockRows ?? DEFAULT_BLOCK_ROWS,
      ...(options.signal && { signal: options.signal }),
      progress: (done) => options.progress?.(done, raw.readouts),
    });
    const facts = scanFacts(file, raw.header, index, chosen);
    const discrepancies = findDiscrepancies(raw.header, index, facts);
    return {
      file,
      group: raw.group,
      readouts: raw.readouts,
      header: raw.header,
      index,
      facts,
      discrepancies,
    };
  } finally {
    raw.close();
  }
}
