import type { AxisWindow, WindowFigures } from "../kernels/point-spread.js";
import type { WindowAxis } from "../kernels/window.js";

/** The axis that windows are measured on; without one, the limit of many samples. */
export interface Ruler {
  readonly axis: WindowAxis | undefined;
  readonly pixelMm: number | undefined;
}

/** A window and its figures. */
export interface Measured {
  readonly name: string;
  readonly window: AxisWindow;
  readonly gainsAt: (u: number) => number;
  readonly figures: WindowFigures;
}

const ROWS: readonly (readonly [label: string, value: (figures: WindowFigures) => number | null])[] = [
  ["coherent gain", (f) => f.coherentGain],
  ["equivalent noise bandwidth, bins", (f) => f.equivalentNoiseBandwidthBins],
  ["width at -3 dB, px", (f) => f.width3DbPixels],
  ["width at -6 dB, px", (f) => f.width6DbPixels],
  ["point spread FWHM, px", (f) => f.pointFwhmPixels],
  ["line spread FWHM, px", (f) => f.lineFwhmPixels],
  ["highest side lobe, dB", (f) => f.highestSideLobeDb],
  ["side lobes fall, dB per octave", (f) => f.sideLobeFallOffDbPerOctave],
  ["noise factor", (f) => f.noiseFactor],
  ["SNR gain, flat region", (f) => f.flatSnrGain],
  ["SNR gain, point", (f) => f.pointSnrGain],
  ["overshoot at an edge, %", (f) => 100 * f.edgeOvershoot],
  ["undershoot behind it, %", (f) => 100 * f.edgeUndershoot],
];
/** Windows side by side in 80 columns. */
const ACROSS = 3;

/** Windows side by side, a figure a line. */
export function taperTable(found: readonly Measured[], { axis, pixelMm }: Ruler, shape: string): string {
  const rows =
    pixelMm === undefined
      ? ROWS
      : [
          ...ROWS.slice(0, 6),
          ["point spread FWHM, mm", (f: WindowFigures) => f.pointFwhmPixels * pixelMm] as const,
          ...ROWS.slice(6),
        ];
  const width = 1 + Math.max(...rows.map(([label]) => label.length));
  const cell = (text: string) => ` ${text}`.padStart(15);
  const blocks: string[] = [];
  for (let first = 0; first < found.length; first += ACROSS) {
    const some = found.slice(first, first + ACROSS);
    blocks.push(
      [
        `${"".padEnd(width)}${some.map(({ name }) => cell(shortName(name))).join("")}`,
        ...rows.map(
          ([label, value]) =>
            `${label.padEnd(width)}${some.map(({ figures }) => cell(digits(value(figures)))).join("")}`,
        ),
      ].join("\n"),
    );
  }
  const samples = axis ? `${axis.length} samples` : "limit of many samples";
  const pixel = pixelMm === undefined ? "" : `, pixels of ${digits(pixelMm)} mm`;
  return `${samples}${pixel}, ${shape === "radial" ? "radial, in 2-D" : "along one axis"}\n\n${blocks.join("\n\n")}\nFor research only, not for diagnosis or treatment.`;
}

/** `tukey:alpha=0.5` as `tukey:0.5`, and no longer than a column. */
function shortName(name: string): string {
  const short = name.replaceAll(/:[a-z]+=/g, ":");
  return short.length <= 14 ? short : `${short.slice(0, 13)}…`;
}

function digits(value: number | null): string {
  if (value === null) return "-";
  return Number.isFinite(value) ? String(Number(value.toPrecision(5))) : "none";
}

/** The figures as JSON and CSV have them: null for what is infinite. */
export function finiteFigures(
  figures: WindowFigures,
  pixelMm: number | undefined,
): Record<string, number | null> {
  const all = {
    ...figures,
    ...(pixelMm !== undefined && { pointFwhmMm: figures.pointFwhmPixels * pixelMm }),
  };
  return Object.fromEntries(
    Object.entries(all).map(([name, value]) => [
      name,
      value !== null && Number.isFinite(value) ? value : null,
    ]),
  );
}
