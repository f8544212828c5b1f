import metadata from "../package.json" with { type: "json" };

/** Version of this program, from its package. */
export const VERSION: string = metadata.version;

/** Version of the HDF5 library's package, which is pinned exactly. */
export const HDF5_VERSION: string = metadata.dependencies.h5wasm;
