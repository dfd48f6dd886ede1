/** Halving an interval of doubles reaches neighbours within this many steps. */
const HALVINGS_MAX = 2_200;

/** How many Walsh averages (dᵢ + dⱼ)/2, i ≤ j, are at most `value`. `sorted` ascends. */
function countAtMost(sorted: Float64Array, value: number): number {
  let count = 0;
  let left = 0;
  for (let right = sorted.length - 1; right >= 0; right -= 1) {
    while (left <= sorted.length - 1 && (sorted[left]! + sorted[right]!) / 2 <= value) left += 1;
    // Partners of `right` from 0 to left − 1 qualify; pairs are counted once, with i ≤ right.
    count += Math.min(left, right + 1);
  }
  return count;
}

/**
 * The k-th smallest Walsh average (k from 1), without forming all n(n + 1)/2 of them: the value is
 * closed in by halving, counting those below in linear time, down to neighbouring doubles.
 *
 * @param sorted differences, ascending, at least one
 */
export function walshAverage(sorted: Float64Array, k: number): number {
  let lower = sorted[0]!;
  let upper = sorted.at(-1)!;
  if (countAtMost(sorted, lower) >= k) return lower;
  // Invariant: fewer than k averages are ≤ lower; at least k are ≤ upper.
  for (let step = 0; step < HALVINGS_MAX; step += 1) {
    const middle = lower + (upper - lower) / 2;
    if (middle <= lower || middle >= upper) break;
    if (countAtMost(sorted, middle) >= k) upper = middle;
    else lower = middle;
  }
  return upper;
}
