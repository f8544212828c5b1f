/** A file of the sources as text: vite's convention, which `scripts/build.mjs` keeps in the bundle. */
declare module "*?raw" {
  const text: string;
  export default text;
}
