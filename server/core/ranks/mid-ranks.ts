/** Ranks from 1, ties sharing their mean rank, and how large the groups of ties are. */
export interface MidRanks {
  readonly ranks: Float64Array;
  /** Sizes of the groups of equal values, those of one value included; ascending by value. */
  readonly tieSizes: readonly number[];
}

/**
 * Mid-ranks of the values: equal values share the mean of the ranks they span. Values are equal
 * only when identical; rounding beforehand is the caller's decision.
 */
export function midRanks(values: ArrayLike<number>): MidRanks {
  const order = Array.from({ length: values.length }, (_, index) => index);
  order.sort((left, right) => values[left]! - values[right]!);
  const ranks = new Float64Array(values.length);
  const tieSizes: number[] = [];
  let start = 0;
  while (start < order.length) {
    let end = start + 1;
    while (end < order.length && values[order[end]!] === values[order[start]!]) end += 1;
    for (let place = start; place < end; place += 1) ranks[order[place]!] = (start + 1 + end) / 2;
    tieSizes.push(end - start);
    start = end;
  }
  return { ranks, tieSizes };
}
