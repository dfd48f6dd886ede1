/**
 * The exact null distribution of the signed-rank sum: every rank is in the sum or not, each with
 * probability one half, independently.
 *
 * By the shift algorithm (Streitberg & Röhmel 1986; Wilcoxon, Katti & Wilcox 1970): the
 * distribution with one more rank is the mean of the old one and the old one shifted by that rank.
 * Ranks are doubled, so that mid-ranks of ties are whole numbers.
 *
 * @param doubledRanks twice the ranks, whole numbers
 * @returns probability by doubled sum, from 0 to the sum of all doubled ranks
 */
export function signedRankDistribution(doubledRanks: ArrayLike<number>): Float64Array {
  let total = 0;
  for (let index = 0; index < doubledRanks.length; index += 1) total += doubledRanks[index]!;
  const probabilities = new Float64Array(total + 1);
  probabilities[0] = 1;
  let reached = 0;
  for (let index = 0; index < doubledRanks.length; index += 1) {
    const rank = doubledRanks[index]!;
    reached += rank;
    for (let sum = reached; sum >= 0; sum -= 1) {
      const shifted = sum >= rank ? probabilities[sum - rank]! : 0;
      probabilities[sum] = (probabilities[sum]! + shifted) / 2;
    }
  }
  return probabilities;
}

/** P(sum ≤ doubledSum), added up from the small end so that small tails keep their digits. */
export function signedRankLowerTail(probabilities: Float64Array, doubledSum: number): number {
  let tail = 0;
  const last = Math.min(doubledSum, probabilities.length - 1);
  for (let sum = 0; sum <= last; sum += 1) tail += probabilities[sum]!;
  return Math.min(1, tail);
}
