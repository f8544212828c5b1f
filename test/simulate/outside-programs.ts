import { execFileSync } from "node:child_process";

/** Run a program to its end; undefined where it is absent or fails. */
function attempt(program: string, args: readonly string[]): string | undefined {
  try {
    return execFileSync(program, args, { encoding: "utf8", stdio: ["ignore", "pipe", "ignore"] });
  } catch {
    return undefined;
  }
}

/** A Python that has h5py and NumPy: $PYTHON, the first on the path, or the system's own. */
export function pythonWithH5py(): string | undefined {
  const candidates = [process.env.PYTHON, "python3", "/usr/bin/python3"];
  return candidates.find((python) => python && attempt(python, ["-c", "import h5py, numpy"]) !== undefined);
}

/**
 * Compile a C++ program against the raw-data standard's own library.
 * @returns false where the compiler, the library or its header is absent
 */
export function compileWithStandardLibrary(source: string, program: string): boolean {
  const header = attempt("g++", ["-E", "-x", "c++", "-include", "ismrmrd/xml.h", "/dev/null"]);
  if (header === undefined) return false;
  const hdf5 = attempt("pkg-config", ["--cflags", "--libs", "hdf5"]) ?? "-I/usr/include/hdf5/serial";
  const flags = hdf5.split(/\s+/).filter((flag) => flag.startsWith("-I") || flag.startsWith("-L"));
  execFileSync("g++", ["-std=c++11", "-w", ...flags, source, "-o", program, "-lismrmrd"]);
  return true;
}
