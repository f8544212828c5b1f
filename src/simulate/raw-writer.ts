import { randomUUID } from "node:crypto";
import { existsSync } from "node:fs";
import { rename, rm, writeFile } from "node:fs/promises";
import { basename, dirname, join } from "node:path";
import { setImmediate } from "node:timers/promises";
import { gunzipSync } from "node:zlib";
import { OutputError } from "../errors.js";
import { Hdf5Fault, type HeadValues, RawHdf5 } from "./raw-hdf5.js";
import { TEMPLATE_GZIP_BASE64 } from "./template.js";

/** Samples in memory before they go to the file. */
const BATCH_BYTES = 8 * 2 ** 20;
/** A readout takes some milliseconds to compute, and an interrupt should not wait for a second. */
const READOUTS_BETWEEN_PAUSES = 32;

export type { HeadValues };

/** One readout as it is stored. */
export interface RawReadout {
  /** Members of the head by the standard's names (`idx.slice` for a counter); those left out are 0. */
  readonly head: HeadValues;
  /** Interleaved complex64, [coil, sample]. */
  readonly samples: Float32Array;
}

export interface WriteOptions {
  readonly overwrite?: boolean | undefined;
  readonly signal?: AbortSignal | undefined;
  readonly onProgress?: ((written: number, total: number) => void) | undefined;
}

/**
 * Write a raw-data file of the ISMRMRD standard (Inati et al. 2017, Magn Reson Med 77:411): group `dataset`.
 * The file appears under its name only when it is whole. Memory is bounded by one batch of readouts. The same
 * header and readouts give the same bytes: nothing that is written carries a time.
 * @param count number of readouts; `readouts` must give exactly as many
 * @throws OutputError if the file exists (unless `overwrite`) or cannot be written; the signal's reason when aborted
 */
export async function writeRaw(
  file: string,
  xml: string,
  count: number,
  readouts: Iterable<RawReadout>,
  options: WriteOptions = {},
): Promise<void> {
  refuseExisting(file, options);
  const temporary = join(dirname(file), `.${basename(file)}.${randomUUID()}.partial`);
  try {
    await writeFile(temporary, gunzipSync(Buffer.from(TEMPLATE_GZIP_BASE64, "base64")), { flag: "wx" });
    await fill(temporary, xml, count, readouts, options);
    refuseExisting(file, options);
    await rename(temporary, file);
  } catch (error) {
    await rm(temporary, { force: true }).catch(() => undefined); // the fault that led here is the one to report
    throw options.signal?.aborted ? error : outputFault(file, error);
  }
}

async function fill(
  temporary: string,
  xml: string,
  count: number,
  readouts: Iterable<RawReadout>,
  { signal, onProgress }: WriteOptions,
): Promise<void> {
  const hdf5 = await RawHdf5.open(temporary);
  try {
    hdf5.writeHeader(xml);
    hdf5.resize(count);
    let batch: RawReadout[] = [];
    let bytes = 0;
    let made = 0;
    const flush = () => {
      hdf5.writeReadouts(made - batch.length, batch);
      batch = [];
      bytes = 0;
    };
    for (const readout of readouts) {
      batch.push(readout);
      bytes += readout.samples.byteLength;
      made++;
      if (bytes >= BATCH_BYTES) flush();
      if (made % READOUTS_BETWEEN_PAUSES === 0) {
        await setImmediate(); // let signals and timers in
        signal?.throwIfAborted();
        onProgress?.(made, count);
      }
    }
    if (made !== count) throw new Error(`${made} readouts were given for ${count}`);
    flush();
    signal?.throwIfAborted();
    onProgress?.(made, count);
  } catch (error) {
    hdf5.abandon();
    throw error;
  }
  hdf5.close();
}

function refuseExisting(file: string, options: WriteOptions): void {
  if (!options.overwrite && existsSync(file))
    throw new OutputError({ file }, "exists already", "Choose another name or allow overwriting");
}

/** What the file system or the HDF5 library refused is an OutputError; anything else stays what it is. */
function outputFault(file: string, error: unknown): unknown {
  if (!(error instanceof Hdf5Fault || isSystemError(error))) return error;
  const reason = error.message.split(",", 1)[0]; // what follows is the temporary name
  const mend = "Check that the folder exists, may be written and has space";
  return new OutputError({ file }, `could not be written: ${reason}`, mend, { cause: error });
}

function isSystemError(error: unknown): error is NodeJS.ErrnoException {
  return error instanceof Error && "syscall" in error;
}
