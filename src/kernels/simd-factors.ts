/** How one Stockham pass of an odd radix above 7 is done: by its sums, or Rader's convolution of length radix - 1. */
export type PassMethod = "kernel" | "direct" | "rader";

export interface PassChoice {
  readonly radix: number;
  readonly method: PassMethod;
}

/** A length as passes, or as Bluestein's convolution of a longer, smooth length. */
export type LengthChoice = { readonly passes: readonly PassChoice[] } | { readonly convolution: number };

interface Costed {
  readonly choice: LengthChoice;
  /** Time per point of four lines; the unit was about 0.65 ns where the constants below were measured. */
  readonly cost: number;
}

/** Time per point of the passes with kernels of their own. */
const KERNEL_COST: Readonly<Record<number, number>> = { 2: 1.1, 3: 1.5, 4: 1.2, 5: 2.2, 7: 3.2, 8: 1.7 };
/** A direct pass takes this times its radix. */
const DIRECT_COST = 0.32;
/** What a convolution takes beside its two transforms, per point of it. Rader's also gathers and scatters. */
const RADER_COST = 5;
const CHIRP_COST = 2.5;

const known = new Map<number, Costed>();

/** The fastest way known to transform `length` points (>= 1); the same on every machine. */
export function chooseLength(length: number): LengthChoice {
  return costed(length).choice;
}

function costed(length: number): Costed {
  let found = known.get(length);
  if (!found) {
    found = cheaper(asPasses(length), length);
    known.set(length, found);
  }
  return found;
}

function asPasses(length: number): Costed {
  let cost = 0;
  const passes = radices(length).map((radix): PassChoice => {
    const kernel = KERNEL_COST[radix];
    const direct = DIRECT_COST * radix;
    // Rader needs a prime; the radices above 7 are.
    const rader = kernel === undefined ? 2 * costed(radix - 1).cost + RADER_COST : 0;
    cost += kernel ?? Math.min(direct, rader);
    return { radix, method: kernel !== undefined ? "kernel" : direct <= rader ? "direct" : "rader" };
  });
  return { choice: { passes }, cost };
}

/** The passes, or Bluestein's way if that costs less. Smooth lengths never do. */
function cheaper(passes: Costed, length: number): Costed {
  if (radices(length).every((radix) => radix in KERNEL_COST)) return passes;
  const convolution = smoothLength(2 * length - 1);
  const cost = ((2 * costed(convolution).cost + CHIRP_COST) * convolution) / length;
  return cost < passes.cost ? { choice: { convolution }, cost } : passes;
}

/** The length >= least that has no prime factor above 7 and the least total cost. */
function smoothLength(least: number): number {
  let best = 0;
  let bestCost = Number.POSITIVE_INFINITY;
  for (let length = least; length < 2 * least; length++) {
    if (!isSmooth(length)) continue;
    const cost = costed(length).cost * length;
    if (cost < bestCost) [best, bestCost] = [length, cost];
  }
  return best;
}

function isSmooth(length: number): boolean {
  let rest = length;
  for (const prime of [2, 3, 5, 7]) while (rest % prime === 0) rest /= prime;
  return rest === 1;
}

/** Factors of `length` in the order of the passes: at most one 2 or 8, then 4s, then odd primes, rising. */
export function radices(length: number): number[] {
  const factors: number[] = [];
  let rest = length;
  // An 8 in place of a 2 and a 4 saves a pass; all the twos in 8s are not faster, for want of registers.
  if (Math.log2(length & -length) % 2 === 1 && rest % 8 === 0) {
    factors.push(8);
    rest /= 8;
  }
  while (rest % 4 === 0) {
    factors.push(4);
    rest /= 4;
  }
  if (rest % 2 === 0) {
    factors.unshift(2);
    rest /= 2;
  }
  for (let prime = 3; prime * prime <= rest; prime += 2) {
    while (rest % prime === 0) {
      factors.push(prime);
      rest /= prime;
    }
  }
  if (rest > 1) factors.push(rest);
  return factors;
}

/** The powers 0 .. prime - 2 of the least primitive root of an odd prime below 2^26, modulo the prime. */
export function rootPowers(prime: number): Uint32Array {
  const powers = new Uint32Array(prime - 1);
  for (let root = 2; ; root++) {
    let power = 1;
    let order = 0;
    do {
      powers[order++] = power;
      power = (power * root) % prime;
    } while (power !== 1);
    if (order === prime - 1) return powers;
  }
}
