import type { ConfidenceInterval, Estimable } from '../estimability.ts';

/** `friedmanTest(table: Matrix)` gives this. */
export type FriedmanTest = Estimable<{
  readonly participants: number;
  readonly conditions: number;
  readonly chiSquare: number;
  readonly degreesOfFreedom: number;
  readonly pValue: number;
  /** Kendall's coefficient of concordance, 0 to 1. */
  readonly kendallsW: number;
  readonly rankSums: readonly number[];
  readonly meanRanks: readonly number[];
  /** True when some participant gave two conditions the same value. */
  readonly tied: boolean;
  readonly imanDavenport: Estimable<{
    readonly fStatistic: number;
    readonly degreesOfFreedom: number;
    readonly errorDegreesOfFreedom: number;
    readonly pValue: number;
  }>;
}>;

/** `signedRankTest(differences, options?)` gives this. */
export type SignedRankTest = Estimable<{
  readonly pairs: number;
  /** Differences of exactly zero: they carry no sign and are left out of the test. */
  readonly zeroDifferences: number;
  readonly pairsUsed: number;
  readonly tied: boolean;
  /** Sum of the ranks of positive and of negative differences. */
  readonly positiveRankSum: number;
  readonly negativeRankSum: number;
  readonly method: 'exact' | 'normal-approximation';
  /** Two-sided. */
  readonly pValue: number;
  /** Matched-pairs rank-biserial correlation, −1 to 1. */
  readonly rankBiserial: number;
  /** Hodges–Lehmann: the median of the Walsh averages of all differences, zeros included. */
  readonly hodgesLehmann: number;
  readonly interval: Estimable<ConfidenceInterval & { readonly achievedLevel: number }>;
}>;

export interface SignedRankOptions {
  /** Default 0.95. */
  readonly confidenceLevel?: number;
}
