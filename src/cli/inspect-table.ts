import { readoutFacts } from "../engine/readout-facts.js";
import type { Scan } from "../engine/scan.js";
import { SPATIAL_AXES, type Xyz } from "../physics/layout.js";
import { wrap } from "./text.js";

/** What a scan holds, as a table of 80 columns. */
export function inspectTable(scan: Scan): string {
  const f = readoutFacts(scan);
  const rows: [string, string][] = [
    ["file", `${scan.file}, group ${scan.group}`],
    ["encoding", `${f.encoding} of ${scan.header.encodings.length}, ${f.trajectory}, ${f.dimensions}-D`],
    ["encoded", space(f.encodedSpace)],
    ["reconstructed", space(f.reconstructedSpace)],
    ["oversampling", perAxis(f.oversampling, (v) => number(v))],
    ["partial Fourier", perAxis(f.partialFourier, percent)],
    ["phase resolution", `y ${percent(f.phaseResolution.y)}, z ${percent(f.phaseResolution.z)}`],
    [
      "acceleration",
      `y ${f.acceleration.y}, z ${f.acceleration.z}${f.calibrationMode ? `, calibration ${f.calibrationMode}` : ""}`,
    ],
    ["lines", lines(f)],
    ["echoes", echoes(f)],
    ["slices", slices(f)],
    ["repetitions", `${f.repetitions}; averages ${f.averages}; sets ${f.sets}; phases ${f.phases}`],
    ["channels", String(f.channels)],
    [
      "field",
      `${f.fieldT === null ? "not stated" : `${number(f.fieldT)} T`}, resonance ${(f.resonanceHz * 1e-6).toFixed(6)} MHz`,
    ],
    ["dwell time", `${number(f.dwellSeconds * 1e6)} us`],
    [
      "receiver bandwidth",
      `${rounded(f.bandwidthHz * 1e-3)} kHz, ${rounded(f.bandwidthPerPixelHz)} Hz per pixel`,
    ],
    ["readout duration", `${rounded(f.readoutDurationSeconds * 1e3)} ms`],
    ["readout gradient", `${rounded(f.readoutGradientTPerM * 1e3)} mT/m`],
    [
      "fat-water shift",
      `${rounded(f.fatWaterShift.pixels)} px, ${rounded(f.fatWaterShift.mm)} mm (${f.fatWaterShift.ppm} ppm, ${rounded(f.fatWaterShift.hz)} Hz)`,
    ],
    [
      "readouts",
      Object.entries(f.readouts)
        .filter(([, n]) => n > 0)
        .map(([role, n]) => `${n} ${role}`)
        .join(", "),
    ],
  ];
  const width = Math.max(...rows.map(([name]) => name.length)) + 2;
  const table = rows.map(([name, value]) => wrap(name.padEnd(width) + value, 80, " ".repeat(width)));
  const found = scan.discrepancies.map(({ severity, message }) =>
    wrap(`${severity === "problem" ? "! " : "- "}${message}`, 80, "  "),
  );
  const head = found.length ? "discrepancies (! fails under --strict)" : "discrepancies: none";
  return [...table, "", head, ...found].join("\n");
}

type Facts = ReturnType<typeof readoutFacts>;

function lines(f: Facts): string {
  const { range, partitions, expected, missing, duplicates, allZero, coverage } = f.lines;
  const parts = [`${range.minimum} to ${range.maximum}`];
  if (partitions.maximum > 0) parts.push(`partitions ${partitions.minimum} to ${partitions.maximum}`);
  parts.push(`${expected - missing} of ${expected} there (${coverage})`);
  if (duplicates) parts.push(`${duplicates} duplicates`);
  if (allZero) parts.push(`${allZero} all-zero`);
  return parts.join(", ");
}

function echoes(f: Facts): string {
  const times = f.echoTimesMs.length ? `, TE ${f.echoTimesMs.map(number).join(", ")} ms` : "";
  return `${f.echoes}${times}, read ${[...new Set(f.readoutDirections)].join(" and ")}`;
}

function slices(f: Facts): string {
  if (f.slices === 1) return "1";
  const positions = f.slicePositionsMm.map((mm) => (mm === null ? "?" : number(mm)));
  return `${f.slices}; in space: ${f.sliceOrder.join(" ")} at ${positions.join(" ")} mm`;
}

function space({ matrix, fovMm }: Facts["encodedSpace"]): string {
  return `${matrix.x} x ${matrix.y} x ${matrix.z} over ${SPATIAL_AXES.map((axis) => number(fovMm[axis])).join(" x ")} mm`;
}

function perAxis(values: Xyz, show: (value: number) => string): string {
  return SPATIAL_AXES.map((axis) => `${axis} ${show(values[axis])}`).join(", ");
}

function percent(value: number): string {
  return `${rounded(100 * value)} %`;
}

/** A number that was worked out. */
function rounded(value: number): string {
  return String(Number(value.toPrecision(4)));
}

/** A number that the file states. */
function number(value: number): string {
  return String(Number(value.toPrecision(6)));
}
