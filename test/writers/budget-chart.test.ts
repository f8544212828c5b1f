import { describe, expect, test } from "vitest";
import { budgetPoint, type ReadoutPlan, sweepDwellSeconds } from "../../src/physics/readout-budget.js";
import { budgetCharts, budgetDrawing } from "../../src/writers/budget-chart.js";
import { drawingSvg } from "../../src/writers/drawing-svg.js";

const plan: ReadoutPlan = {
  fieldT: 3,
  resonanceHz: 127.732435e6,
  encodedSamples: 512,
  encodedFovMm: 512,
  pixels: 256,
  fovMm: 256,
  dwellSeconds: 1 / (512 * 200),
};
const questions = {
  fatPpm: -3.4,
  fieldErrorHz: -50,
  withinPixels: 0.5,
  t2StarSeconds: 0.02,
  isocentreM: 0.1,
};
const present = budgetPoint(plan, questions, plan.dwellSeconds);
const curve = sweepDwellSeconds(plan, 50, 800, 33).map((dwell) => budgetPoint(plan, questions, dwell));

describe("the picture of a budget", () => {
  const [shift, noise] = budgetCharts(present, curve, 0.5);
  const y = (chart: typeof shift, name: string) =>
    Array.from(chart?.series.find((series) => series.name.startsWith(name))?.y ?? []);

  test("shows shifts that fall and noise that rises with the bandwidth", () => {
    for (const name of ["fat-water shift", "field error"]) {
      const values = y(shift, name);
      expect(values).toHaveLength(33);
      expect(values.every((value, i) => i === 0 || value < values[i - 1]!)).toBe(true);
      expect(values[0]! / values.at(-1)!).toBeCloseTo(16, 9); // inverse to the bandwidth, 50 to 800 Hz
    }
    const values = y(noise, "noise");
    expect(values[0]).toBeCloseTo(0.5, 9); // root of 50 / 200
    expect(values.at(-1)).toBeCloseTo(2, 9);
  });

  test("marks the present point on every curve", () => {
    expect(shift?.series.at(-1)).toMatchObject({ name: "now, 200 Hz", mark: "points" });
    expect(y(shift, "now")).toEqual([-present.fatPixels, -present.fieldErrorPixels, present.blurPixels]);
    for (const chart of [shift, noise])
      expect(chart?.references).toContainEqual({ axis: "x", at: present.pixelBandwidthHz, label: "now" });
  });

  test("leaves a field error of 0 out: a logarithm has none", () => {
    const still = { ...questions, fieldErrorHz: 0 };
    const flat = [50, 200, 800].map((hz) => budgetPoint(plan, still, 1 / (512 * hz)));
    const svg = drawingSvg(budgetDrawing(flat[1]!, flat, 0.5));
    expect(svg).not.toMatch(/NaN|Infinity|field error/);
    expect(drawingSvg(budgetDrawing(present, curve, 0.5))).toContain("field error");
  });
});
