import type { ComparisonPage } from "../../src/writers/comparison-page.js";
import { encodePng } from "../../src/writers/png.js";

/** An image of one grey level, 40 x 30, so that a pixel on the screen tells which variant it shows. */
export function flatPng(level: number): Uint8Array {
  return encodePng({ width: 40, height: 30, colour: "grey", pixels: new Uint8Array(1200).fill(level) });
}

/** A name with all that markup could trip over. */
export const AWKWARD = `<img src=x onerror="document.title='broken'"> & 'b' </script>`;

const LEVELS = [40, 120, 200, 250];
const VALUES: readonly Record<string, number | null>[] = [
  { width: 9.5, snr: 100, psnr: Number.POSITIVE_INFINITY },
  { width: 10.25, snr: 20, psnr: 31 },
  { width: null, snr: -3, psnr: 4.5 },
  { width: 2, snr: 1e3, psnr: Number.NaN },
];

/** Four variants: as text, "10.25" would come before "2"; one value is missing, one infinite, one not a number. */
export function sample(changes: Partial<ComparisonPage> = {}): ComparisonPage {
  const names = ["apodize.window=none", "apodize.window=hann", AWKWARD, "apodize.window=tukey:0.5"];
  return {
    title: `bell ${AWKWARD}.h5`,
    caution: "For research only, not for diagnosis or treatment.",
    facts: [
      ["File", `bell ${AWKWARD}.h5`],
      ["SHA-256", "9b74c9897bac770ffc029102a200c5de9b74c9897bac770ffc029102a200c5de"],
    ],
    reference: "apodize.window=none",
    columns: [
      { id: "width", label: "Resolution, measured", unit: "mm", describe: "Full width at half maximum." },
      { id: "snr", label: "SNR", unit: "", describe: "Mean by noise." },
      { id: "psnr", label: "PSNR", unit: "dB", describe: "Against the reference." },
    ],
    variants: names.map((name, v) => ({
      name,
      values: VALUES[v] ?? {},
      recipe: `carillon: 1\nstages:\n  # ${v} < 4 & "so"\n  - apodize: { window: w${v} }\n`,
      image: flatPng(LEVELS[v] ?? 0),
      difference: v === 0 ? undefined : flatPng(v),
    })),
    greyRange: { black: 0, white: 1.25, rule: "99.5th percentile of the foreground" },
    figures: [
      {
        title: "Edge profiles",
        svg: '<svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 10 10" role="img"><title>Edges</title><path d="M0 0L9 9"/></svg>',
        describe: "Across the edge.",
      },
    ],
    ...changes,
  };
}
