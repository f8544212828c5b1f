/**
 * Unwrap phases in two or three dimensions, best pixels first: each pixel's reliability is the inverse of its second
 * differences, each edge between neighbours is as reliable as its two pixels together, and edges join groups of pixels
 * in falling order of reliability, a whole group moved by full turns so that the edge has no jump.
 *
 * Source: Herraez, Burton, Lalor, Gdeisat 2002, Appl Opt 41:7437, doi:10.1364/AO.41.007437 (2-D); Abdul-Rahman,
 * Gdeisat, Burton, Lalor, Lilley, Moore 2007, Appl Opt 46:6623, doi:10.1364/AO.46.006623 (3-D).
 */
export interface UnwrappedPhase {
  /** Radians, [slices, rows, columns]; outside the mask the wrapped input. */
  readonly radians: Float64Array;
  /** Number of the connected region of each pixel, from 0 in order of size (most pixels first); -1 outside the mask. */
  readonly regions: Int32Array;
  readonly regionCount: number;
}

export interface VolumeSize {
  readonly slices: number;
  readonly rows: number;
  readonly columns: number;
}

/**
 * @param radians wrapped phase, [slices, rows, columns], any multiple of a turn off
 * @param mask    1 where there is signal; regions that it does not connect keep whole turns between them undecided
 */
export function unwrapPhase(
  radians: ArrayLike<number>,
  mask: ArrayLike<number>,
  { slices, rows, columns }: VolumeSize,
): UnwrappedPhase {
  const size = slices * rows * columns;
  const grid = { slices, rows, columns, strides: [1, columns, rows * columns] as const };
  const { first, second, order } = sortedEdges(radians, mask, grid);
  const groups = new Groups(size);
  for (const edge of order) groups.join(first[edge]!, second[edge]!, radians);
  const out = new Float64Array(size);
  for (let i = 0; i < size; i++) out[i] = radians[i]! + 2 * Math.PI * (mask[i] ? groups.turns(i) : 0);
  return { radians: out, ...groups.numbered(mask) };
}

interface Grid extends VolumeSize {
  readonly strides: readonly [number, number, number];
}

/** Nearest multiple of a full turn taken off: in [-pi, pi]. */
export function wrapped(radians: number): number {
  return radians - 2 * Math.PI * Math.round(radians / (2 * Math.PI));
}

/** Second differences squared and summed over the axes: large means unreliable. Missing neighbours count as a half turn. */
function roughness(radians: ArrayLike<number>, mask: ArrayLike<number>, grid: Grid): Float64Array {
  const { slices, rows, columns, strides } = grid;
  const out = new Float64Array(slices * rows * columns);
  for (let z = 0, i = 0; z < slices; z++) {
    for (let y = 0; y < rows; y++) {
      for (let x = 0; x < columns; x++, i++) {
        if (!mask[i]) continue;
        const inside = [x > 0 && x + 1 < columns, y > 0 && y + 1 < rows, z > 0 && z + 1 < slices];
        for (let axis = 0; axis < (slices > 1 ? 3 : 2); axis++) {
          const stride = strides[axis]!;
          const whole = inside[axis] && mask[i - stride] && mask[i + stride];
          const second = whole
            ? wrapped(radians[i - stride]! - radians[i]!) - wrapped(radians[i]! - radians[i + stride]!)
            : Math.PI;
          out[i]! += second * second;
        }
      }
    }
  }
  return out;
}

/** Edges between neighbours inside the mask and their order, most reliable first; ties keep the order of the pixels. */
function sortedEdges(radians: ArrayLike<number>, mask: ArrayLike<number>, grid: Grid) {
  const { slices, rows, columns, strides } = grid;
  const rough = roughness(radians, mask, grid);
  const first = new Int32Array(3 * rough.length);
  const second = new Int32Array(3 * rough.length);
  const cost = new Float64Array(3 * rough.length);
  let count = 0;
  for (let z = 0, i = 0; z < slices; z++) {
    for (let y = 0; y < rows; y++) {
      for (let x = 0; x < columns; x++, i++) {
        if (!mask[i]) continue;
        const more = [x + 1 < columns, y + 1 < rows, z + 1 < slices];
        for (let axis = 0; axis < 3; axis++) {
          const j = i + strides[axis]!;
          if (!more[axis] || !mask[j]) continue;
          first[count] = i;
          second[count] = j;
          // reliability 1/rough_i + 1/rough_j, falling, is the same order as this, rising
          cost[count++] = 1 / (1 / (rough[i]! + 1e-12) + 1 / (rough[j]! + 1e-12));
        }
      }
    }
  }
  return { first, second, order: ascending(cost.subarray(0, count)) };
}

/** Indices that sort `keys` (all >= 0) upwards, ties in order: two passes of counting over the bits of the float32 value. */
function ascending(keys: Float64Array): Uint32Array {
  const bits = new Uint32Array(Float32Array.from(keys).buffer); // for numbers >= 0 the bit patterns sort like the numbers
  let from = Uint32Array.from(keys, (_, i) => i);
  let to = new Uint32Array(keys.length);
  for (const shift of [0, 16]) {
    const starts = new Uint32Array(65537);
    for (const value of bits) starts[((value >>> shift) & 0xffff) + 1]!++;
    for (let b = 0; b < 65536; b++) starts[b + 1]! += starts[b]!;
    for (const index of from) to[starts[(bits[index]! >>> shift) & 0xffff]!++] = index;
    [from, to] = [to, from];
  }
  return from;
}

/** Groups of pixels (union by size) that know how many turns each pixel lies from its group's root. */
class Groups {
  readonly #parent: Int32Array;
  readonly #turns: Int32Array; // to the parent
  readonly #sizes: Int32Array;

  constructor(size: number) {
    this.#parent = Int32Array.from({ length: size }, (_, i) => i);
    this.#turns = new Int32Array(size);
    this.#sizes = new Int32Array(size).fill(1);
  }

  /** Root of a pixel; afterwards the pixel hangs on it directly. */
  #root(pixel: number): number {
    const parent = this.#parent;
    let root = pixel;
    let turns = 0;
    for (; parent[root] !== root; root = parent[root]!) turns += this.#turns[root]!;
    for (let at = pixel; parent[at] !== root && at !== root; ) {
      const next = parent[at]!;
      const step = this.#turns[at]!;
      parent[at] = root;
      this.#turns[at] = turns;
      turns -= step;
      at = next;
    }
    return root;
  }

  /** Turns to add to a pixel. */
  turns(pixel: number): number {
    return this.#root(pixel) === pixel ? 0 : this.#turns[pixel]!;
  }

  join(a: number, b: number, radians: ArrayLike<number>): void {
    const rootA = this.#root(a);
    const rootB = this.#root(b);
    if (rootA === rootB) return;
    const jump = radians[a]! - radians[b]!;
    // turns that group B has to be moved by, relative to group A
    const move = Math.round(jump / (2 * Math.PI)) + this.turns(a) - this.turns(b);
    const [big, small, sign] =
      this.#sizes[rootA]! >= this.#sizes[rootB]! ? [rootA, rootB, 1] : [rootB, rootA, -1];
    this.#parent[small] = big;
    this.#turns[small] = sign * move;
    this.#sizes[big]! += this.#sizes[small]!;
  }

  /** Regions numbered by falling size, ties by their first pixel. */
  numbered(mask: ArrayLike<number>): { regions: Int32Array; regionCount: number } {
    const roots: number[] = [];
    const seen = new Map<number, number>();
    const regions = new Int32Array(this.#parent.length).fill(-1);
    for (let i = 0; i < regions.length; i++) {
      if (!mask[i]) continue;
      const root = this.#root(i);
      if (!seen.has(root)) seen.set(root, roots.push(root) - 1);
      regions[i] = seen.get(root)!;
    }
    const order = roots
      .map((_, i) => i)
      .sort((a, b) => this.#sizes[roots[b]!]! - this.#sizes[roots[a]!]! || a - b);
    const rank = new Int32Array(order.length);
    for (const [place, index] of order.entries()) rank[index] = place;
    for (let i = 0; i < regions.length; i++) if (regions[i]! >= 0) regions[i] = rank[regions[i]!]!;
    return { regions, regionCount: roots.length };
  }
}
