/**
 * Indices of the two echoes closest in time, the earlier one first, and the seconds between them.
 * @throws RangeError when two times are equal
 */
export function closestEchoes(echoSeconds: readonly number[]): {
  first: number;
  second: number;
  gapSeconds: number;
} {
  const order = echoSeconds.map((_, e) => e).sort((a, b) => echoSeconds[a]! - echoSeconds[b]!);
  const gaps = order.slice(1).map((e, i) => echoSeconds[e]! - echoSeconds[order[i]!]!);
  const gapSeconds = Math.min(...gaps);
  if (!(gapSeconds > 0)) throw new RangeError(`echo times ${echoSeconds.join(", ")} s; must differ`);
  const at = gaps.indexOf(gapSeconds);
  return { first: order[at]!, second: order[at + 1]!, gapSeconds };
}

/** How near to whole multiples of the shortest one the gaps between echoes count as such: a twelfth of a turn. */
const WHOLE = 1 / 12;

/**
 * The field that a whole turn between the closest echoes stands for, Hz, if nothing tells it from none: echoes evenly
 * spaced, or at multiples, and read in one direction; undefined where displacement or the other gaps tell.
 */
export function turnHz(
  echoSeconds: readonly number[],
  pixelBandwidthHz: readonly number[],
): number | undefined {
  const { gapSeconds } = closestEchoes(echoSeconds);
  const isAlike = pixelBandwidthHz.every((hz) => Math.sign(hz) === Math.sign(pixelBandwidthHz[0]!));
  const isEven = echoSeconds.every((seconds) => {
    const gaps = (seconds - echoSeconds[0]!) / gapSeconds;
    return Math.abs(gaps - Math.round(gaps)) < WHOLE;
  });
  return isAlike && isEven ? 1 / gapSeconds : undefined;
}

/** Fields that are considered to each side, Hz: half a turn of the closest echoes, twice that where turns can be told. */
export function fieldRangeHz(echoSeconds: readonly number[], pixelBandwidthHz: readonly number[]): number {
  const half = 1 / (2 * closestEchoes(echoSeconds).gapSeconds);
  return turnHz(echoSeconds, pixelBandwidthHz) === undefined ? 2 * half : half;
}
