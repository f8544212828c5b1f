import type { BudgetPoint } from "../physics/readout-budget.js";
import { type Chart, chartDrawing, type Series } from "./chart.js";
import type { Drawing } from "./drawing.js";
import { roundLength, shortNumber } from "./number-text.js";
import { stackedDrawings } from "./stacked-drawings.js";

/** Above how displacements fall with the bandwidth, below how noise rises; the present bandwidth is marked in both. */
export function budgetDrawing(
  present: BudgetPoint,
  curve: readonly BudgetPoint[],
  withinPixels: number,
): Drawing {
  return stackedDrawings("Readout budget", budgetCharts(present, curve, withinPixels).map(chartDrawing));
}

/** @param curve rising bandwidths */
export function budgetCharts(
  present: BudgetPoint,
  curve: readonly BudgetPoint[],
  withinPixels: number,
): Chart[] {
  const [first, last] = [curve[0]!, curve.at(-1)!].map(({ pixelBandwidthHz }) => pixelBandwidthHz);
  const x = {
    label: "bandwidth per pixel",
    unit: "Hz",
    scale: "log" as const,
    domain: [first!, last!] as const,
  };
  const now = { axis: "x" as const, at: present.pixelBandwidthHz, label: "now" };
  const line = (name: string, value: (point: BudgetPoint) => number): Series => ({
    name,
    x: curve.map(({ pixelBandwidthHz }) => pixelBandwidthHz),
    y: curve.map(value),
  });
  const fat = (point: BudgetPoint) => Math.abs(point.fatPixels);
  const error = (point: BudgetPoint) => Math.abs(point.fieldErrorPixels);
  const lengths = (point: BudgetPoint) => [fat(point), error(point), point.blurPixels, withinPixels];
  const values = lengths(present).slice(0, 3);
  return [
    {
      title: "Shift",
      x,
      // Logarithmic: what matters are fractions of a pixel, and they must not be squeezed by the low end.
      y: { label: "length", unit: "px", scale: "log", domain: spanOf([...curve, present].flatMap(lengths)) },
      series: [
        line("fat-water shift", fat),
        ...(error(present) > 0 ? [line("field error", error)] : []), // a logarithm has no 0
        line("point spread", (point) => point.blurPixels),
        line(`limit ${shortNumber(withinPixels)} px`, () => withinPixels),
        {
          name: `now, ${shortNumber(present.pixelBandwidthHz, 4)} Hz`,
          mark: "points",
          x: values.map(() => present.pixelBandwidthHz),
          y: values,
        },
      ],
      references: [now],
      aspect: 0.45,
    },
    {
      title: "Noise",
      x,
      y: { label: "noise against now" },
      series: [line("noise", (point) => 1 / point.relativeSnr)],
      references: [now],
      aspect: 0.3,
    },
  ];
}

/** From 1, 2, 5 times a power of ten below the values above 0 to such a number above them. */
function spanOf(values: readonly number[]): readonly [number, number] {
  const shown = values.filter((value) => value > 0);
  return [roundLength(Math.min(...shown) / 1.05), 1 / roundLength(1 / Math.max(...shown) / 1.05)];
}
