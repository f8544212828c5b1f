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
