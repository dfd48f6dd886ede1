import { normalSurvival, normalSurvivalQuantile } from '../distributions/normal.ts';
import { notEstimable } from '../estimability.ts';
import { assertConfidenceLevel } from '../numerics/confidence-level.ts';
import { largestMagnitude } from '../numerics/magnitude.ts';
import { type MidRanks, midRanks } from './mid-ranks.ts';
import type { SignedRankOptions, SignedRankTest } from './rank-types.ts';
import { signedRankDistribution, signedRankLowerTail } from './signed-rank-distribution.ts';
import { walshAverage } from './walsh-averages.ts';

/** Up to so many pairs the null distribution is exact; it costs pairs³ steps. */
const EXACT_PAIRS_MAX = 100;

/**
 * Wilcoxon's signed-rank test that differences are symmetric about zero, with the Hodges–Lehmann
 * estimate of their centre.
 *
 * Zero differences carry no sign and are left out of the test, as Wilcoxon 1945 (Biometrics Bull.
 * 1:80) did; their number is reported. Tied absolute differences share mid-ranks, and up to 100
 * pairs the p-value is exact for these very ranks, ties included; beyond, it is the normal
 * approximation with tie-corrected variance and continuity correction (Hollander & Wolfe,
 * Nonparametric Statistical Methods, 2nd ed., §3.1). Effect: matched-pairs rank-biserial
 * (W⁺ − W⁻)/(W⁺ + W⁻), Kerby 2014 (Compr. Psychol. 3:1). The estimate of Hodges & Lehmann 1963
 * (Ann. Math. Stat. 34:598) and its interval (§3.3 of the same book) use all differences, zeros
 * included: a zero says where the centre is, though not on which side.
 *
 * Differences are compared as given: when they come from decimal data, round them to the measure's
 * decimals first, or equal differences will not be seen as ties.
 *
 * @param differences first − second, one per pair
 * @returns the test, or why there is none
 * @throws {DomainError} when a difference is not finite or beyond 1e100, or the level not in (0, 1)
 */
export function signedRankTest(
  differences: ArrayLike<number>,
  options: SignedRankOptions = {},
): SignedRankTest {
  const confidenceLevel = options.confidenceLevel ?? 0.95;
  assertConfidenceLevel(confidenceLevel);
  largestMagnitude(differences);
  const pairs = differences.length;
  if (pairs === 0) return notEstimable('too-few-participants', 'There are no pairs.');
  const used = Float64Array.from(differences).filter((difference) => difference !== 0);
  if (used.length === 0) {
    return notEstimable('all-differences-zero', `All ${pairs} differences are zero.`);
  }
  const ranked = midRanks(used.map(Math.abs));
  let doubledPositive = 0;
  used.forEach((difference, index) => {
    if (difference > 0) doubledPositive += 2 * ranked.ranks[index]!;
  });
  const doubledTotal = used.length * (used.length + 1);
  const exact = used.length <= EXACT_PAIRS_MAX;
  const sorted = Float64Array.from(differences).sort();
  return {
    estimable: true,
    pairs,
    zeroDifferences: pairs - used.length,
    pairsUsed: used.length,
    tied: ranked.tieSizes.some((size) => size > 1),
    positiveRankSum: doubledPositive / 2,
    negativeRankSum: (doubledTotal - doubledPositive) / 2,
    method: exact ? 'exact' : 'normal-approximation',
    pValue: exact ? exactPValue(ranked, doubledPositive) : normalPValue(ranked, doubledPositive),
    rankBiserial: (2 * doubledPositive - doubledTotal) / doubledTotal,
    hodgesLehmann: medianWalshAverage(sorted),
    interval: hodgesLehmannInterval(sorted, confidenceLevel),
  };
}

/** Twice the smaller tail: the distribution is symmetric, ties or not. */
function exactPValue({ ranks }: MidRanks, doubledPositive: number): number {
  const probabilities = signedRankDistribution(ranks.map((rank) => 2 * rank));
  const smaller = Math.min(doubledPositive, probabilities.length - 1 - doubledPositive);
  return Math.min(1, 2 * signedRankLowerTail(probabilities, smaller));
}

function normalPValue({ ranks, tieSizes }: MidRanks, doubledPositive: number): number {
  const n = ranks.length;
  const tieTerm = tieSizes.reduce((sum, size) => sum + (size ** 3 - size) / 48, 0);
  const variance = (n * (n + 1) * (2 * n + 1)) / 24 - tieTerm;
  const distance = Math.abs(doubledPositive / 2 - (n * (n + 1)) / 4);
  return Math.min(1, 2 * normalSurvival(Math.max(0, distance - 0.5) / Math.sqrt(variance)));
}

function medianWalshAverage(sorted: Float64Array): number {
  const count = (sorted.length * (sorted.length + 1)) / 2;
  const upperMiddle = walshAverage(sorted, Math.floor(count / 2) + 1);
  if (count % 2 === 1) return upperMiddle;
  return (walshAverage(sorted, count / 2) + upperMiddle) / 2;
}

/**
 * Between the q-th Walsh average from below and from above, with q the largest for which the level
 * is reached: 1 − 2·P(W ≤ q − 1), W the signed-rank sum without ties.
 */
function hodgesLehmannInterval(sorted: Float64Array, confidenceLevel: number) {
  const n = sorted.length;
  const count = (n * (n + 1)) / 2;
  const half = (1 - confidenceLevel) / 2;
  const { q, tail } = n <= EXACT_PAIRS_MAX ? exactDepth(n, half) : normalDepth(n, half);
  if (q < 1) {
    return notEstimable(
      'attainable-confidence-too-low',
      `With ${n} pairs no interval of this kind reaches a level of ${confidenceLevel}.`,
    );
  }
  return {
    estimable: true as const,
    level: confidenceLevel,
    lower: walshAverage(sorted, q),
    upper: walshAverage(sorted, count + 1 - q),
    achievedLevel: 1 - 2 * tail,
  };
}

/** The largest q with P(W ≤ q − 1) ≤ half, and that tail; q = 0 when there is none. */
function exactDepth(n: number, half: number): { q: number; tail: number } {
  const probabilities = signedRankDistribution(Array.from({ length: n }, (_, index) => index + 1));
  let q = 0;
  let tail = 0;
  while (tail + probabilities[q]! <= half) {
    tail += probabilities[q]!;
    q += 1;
  }
  return { q, tail };
}

function normalDepth(n: number, half: number): { q: number; tail: number } {
  const mean = (n * (n + 1)) / 4;
  const deviation = Math.sqrt((n * (n + 1) * (2 * n + 1)) / 24);
  // P(W ≤ q − 1) ≈ Φ((q − ½ − mean)/deviation), with continuity correction.
  const q = Math.floor(mean + 0.5 - deviation * normalSurvivalQuantile(half));
  return { q, tail: normalSurvival((mean + 0.5 - q) / deviation) };
}
