import { describe, expect, it } from "vitest";
import { type LabelGraph, minimizeLabels } from "../../src/kernels/label-graph.js";
import { seededSamples } from "./reference-transform.js";

function graph(rows: number, columns: number, labels: number, seed: number): LabelGraph {
  const positive = (count: number, s: number) => seededSamples(count, s).map((value) => (value + 1) / 2);
  const nodes = rows * columns;
  const costs = positive(nodes * labels, seed);
  return {
    rows,
    columns,
    labels,
    costs,
    right: positive(nodes, seed + 1).map((v) => v / 4),
    down: positive(nodes, seed + 2).map((v) => v / 4),
  };
}

function price({ rows, columns, labels, costs, right, down }: LabelGraph, chosen: ArrayLike<number>): number {
  let sum = 0;
  for (let node = 0; node < rows * columns; node++) {
    sum += costs[node * labels + chosen[node]!]!;
    if ((node + 1) % columns) sum += right[node]! * Math.abs(chosen[node]! - chosen[node + 1]!);
    if (node + columns < rows * columns)
      sum += down[node]! * Math.abs(chosen[node]! - chosen[node + columns]!);
  }
  return sum;
}

/** The least price over all labellings. */
function leastPrice(g: LabelGraph): number {
  const nodes = g.rows * g.columns;
  let best = Number.POSITIVE_INFINITY;
  for (let code = 0; code < g.labels ** nodes; code++) {
    const chosen = Array.from({ length: nodes }, (_, node) => Math.floor(code / g.labels ** node) % g.labels);
    best = Math.min(best, price(g, chosen));
  }
  return best;
}

describe("minimizeLabels", () => {
  it.each([1, 2, 3, 4, 5])("finds the best labels of a chain (seed %i)", (seed) => {
    for (const [rows, columns] of [
      [1, 6],
      [6, 1],
    ] as const) {
      const g = graph(rows, columns, 4, seed);
      expect(price(g, minimizeLabels(g, 3))).toBeCloseTo(leastPrice(g), 5); // float32 messages
    }
  });

  it.each([11, 12, 13, 14])("finds the best labels of a small grid, or nearly (seed %i)", (seed) => {
    const g = graph(3, 3, 3, seed);
    // prices with loops: the bound of the method may be loose; a tenth of one node's cost range
    expect(price(g, minimizeLabels(g, 10)) - leastPrice(g)).toBeLessThan(0.1);
  });

  it("carries a decision through nodes that have none, and stops at a free edge", () => {
    const [columns, labels] = [8, 5];
    const costs = new Float32Array(columns * labels);
    costs.fill(1, 0, labels);
    costs[3] = 0; // node 0 wants label 3
    costs.fill(1, 7 * labels);
    costs[7 * labels + 1] = 0; // node 7 wants label 1
    const right = new Float32Array(columns).fill(0.2);
    right[4] = 0;
    const chosen = minimizeLabels(
      { rows: 1, columns, labels, costs, right, down: new Float32Array(columns) },
      3,
    );
    expect([...chosen]).toEqual([3, 3, 3, 3, 3, 1, 1, 1]);
  });
});
