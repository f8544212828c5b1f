import type { BudgetPoint } from "../physics/readout-budget.js";
import type { Chart } from "./chart.js";

/** Displacement falls and noise rises with the bandwidth; the present one is marked. */
export function budgetChart(present: BudgetPoint, sweep: readonly BudgetPoint[]): Chart {
  const points = [...sweep, present].sort((a, b) => a.pixelBandwidthHz - b.pixelBandwidthHz);
  const x = points.map(({ pixelBandwidthHz }) => pixelBandwidthHz);
  return {
    title: "Readout budget",
    x: { label: "bandwidth per pixel", unit: "Hz", scale: "log" },
    y: { label: "pixels; noise against now", domain: [0, top(points)] },
    series: [
      { name: "fat-water shift (px)", x, y: points.map(({ fatPixels }) => Math.abs(fatPixels)) },
      { name: "field error (px)", x, y: points.map(({ fieldErrorPixels }) => Math.abs(fieldErrorPixels)) },
      { name: "noise (relative)", x, y: points.map(({ relativeSnr }) => 1 / relativeSnr) },
      { name: "point spread (px)", x, y: points.map(({ blurPixels }) => blurPixels) },
    ],
    references: [{ axis: "x", at: present.pixelBandwidthHz, label: "now" }],
    aspect: 0.6,
  };
}

/** Just above the highest curve. */
function top(points: readonly BudgetPoint[]): number {
  const values = points.flatMap(({ fatPixels, fieldErrorPixels, relativeSnr, blurPixels }) => [
    Math.abs(fatPixels),
    Math.abs(fieldErrorPixels),
    1 / relativeSnr,
    blurPixels,
  ]);
  return 1.05 * Math.max(...values);
}
