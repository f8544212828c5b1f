/**
 * Labels on a grid of nodes that minimise `sum cost(node, label) + sum over neighbours weight |label - label'|`, by
 * sequential tree-reweighted message passing; the absolute difference makes each message a two-pass distance transform.
 *
 * Source: Kolmogorov 2006, IEEE Trans Pattern Anal Mach Intell 28:1568, doi:10.1109/TPAMI.2006.200 (TRW-S);
 * Felzenszwalb and Huttenlocher 2006, Int J Comput Vis 70:41, doi:10.1007/s11263-006-7899-4 (distance transform).
 */
export interface LabelGraph {
  readonly rows: number;
  readonly columns: number;
  readonly labels: number;
  /** [rows, columns, labels] */
  readonly costs: Float32Array;
  /** Price per step of the label between a node and its right neighbour, [rows, columns]; the last column is not read. */
  readonly right: Float32Array;
  /** The same with the neighbour below; the last row is not read. */
  readonly down: Float32Array;
}

/** @returns the label of each node, [rows, columns]; always the same for the same graph */
export function minimizeLabels(graph: LabelGraph, rounds: number): Int32Array {
  const passing = new MessagePassing(graph);
  for (let round = 0; round < rounds; round++) {
    passing.sweep(1);
    passing.sweep(-1);
  }
  return passing.decode();
}

class MessagePassing {
  /** Messages that reach a node from its left, right, upper and lower neighbour. */
  readonly #fromLeft: Float32Array;
  readonly #fromRight: Float32Array;
  readonly #fromAbove: Float32Array;
  readonly #fromBelow: Float32Array;
  readonly #belief: Float32Array;

  constructor(private readonly graph: LabelGraph) {
    const size = graph.costs.length;
    this.#fromLeft = new Float32Array(size);
    this.#fromRight = new Float32Array(size);
    this.#fromAbove = new Float32Array(size);
    this.#fromBelow = new Float32Array(size);
    this.#belief = new Float32Array(graph.labels);
  }

  /** All nodes in order (direction 1) or in reverse (-1), each sending to its neighbours further on. */
  sweep(direction: 1 | -1): void {
    const { rows, columns, labels, right, down } = this.graph;
    const nodes = rows * columns;
    for (let step = 0; step < nodes; step++) {
      const node = direction === 1 ? step : nodes - 1 - step;
      const column = node % columns;
      const row = (node - column) / columns;
      const at = node * labels;
      this.#gather(at, chainShare(row, column, rows, columns));
      if (direction === 1) {
        if (column + 1 < columns) this.#send(this.#fromRight, at, this.#fromLeft, at + labels, right[node]!);
        if (row + 1 < rows)
          this.#send(this.#fromBelow, at, this.#fromAbove, at + columns * labels, down[node]!);
      } else {
        if (column > 0) this.#send(this.#fromLeft, at, this.#fromRight, at - labels, right[node - 1]!);
        if (row > 0)
          this.#send(this.#fromAbove, at, this.#fromBelow, at - columns * labels, down[node - columns]!);
      }
    }
  }

  /** Belief of a node, over the number of chains that pass it. */
  #gather(at: number, share: number): void {
    const { costs, labels } = this.graph;
    for (let l = 0; l < labels; l++) {
      const i = at + l;
      const around = this.#fromLeft[i]! + this.#fromRight[i]! + this.#fromAbove[i]! + this.#fromBelow[i]!;
      this.#belief[l] = share * (costs[i]! + around);
    }
  }

  /** A chain's share of the belief, less what the receiver said, seen through the price of a step. */
  #send(back: Float32Array, at: number, target: Float32Array, to: number, price: number): void {
    const { labels } = this.graph;
    let least = Number.POSITIVE_INFINITY;
    for (let l = 0; l < labels; l++) {
      const value = this.#belief[l]! - back[at + l]!;
      target[to + l] = l > 0 ? Math.min(value, target[to + l - 1]! + price) : value;
    }
    for (let l = labels - 1; l >= 0; l--) {
      if (l + 1 < labels) target[to + l] = Math.min(target[to + l]!, target[to + l + 1]! + price);
      least = Math.min(least, target[to + l]!);
    }
    for (let l = 0; l < labels; l++) target[to + l]! -= least;
  }

  /** Node after node, the best label given the labels before it and the messages from beyond it. */
  decode(): Int32Array {
    const { rows, columns, labels, costs, right, down } = this.graph;
    const out = new Int32Array(rows * columns);
    for (let node = 0; node < out.length; node++) {
      const column = node % columns;
      let best = Number.POSITIVE_INFINITY;
      for (let l = 0; l < labels; l++) {
        const i = node * labels + l;
        let cost = costs[i]! + this.#fromRight[i]! + this.#fromBelow[i]!;
        if (column > 0) cost += right[node - 1]! * Math.abs(l - out[node - 1]!);
        if (node >= columns) cost += down[node - columns]! * Math.abs(l - out[node - columns]!);
        if (cost < best) {
          best = cost;
          out[node] = l;
        }
      }
    }
    return out;
  }
}

/** One over the chains through a node: its neighbours before it in order, or those after it, whichever are more. */
function chainShare(row: number, column: number, rows: number, columns: number): number {
  const before = (row > 0 ? 1 : 0) + (column > 0 ? 1 : 0);
  const after = (row + 1 < rows ? 1 : 0) + (column + 1 < columns ? 1 : 0);
  return 1 / Math.max(1, before, after);
}
