import metadata from "../package.json" with { type: "json" };

/** Version of this program, from its package. */
export const VERSION: string = metadata.version;
