import type { ConfidenceInterval, Estimable } from '../estimability.ts';

/** `adjustPValues(pValues, method)`; the names are those of the protocol. */
export type MultiplicityMethod = 'holm' | 'bonferroni' | 'none';

/** `pairedComparison(first, second, options?)` gives this; every difference is first − second. */
export type PairedComparison = Estimable<{
  readonly pairs: number;
  readonly meanDifference: number;
  readonly standardDeviation: number;
  readonly standardError: number;
  readonly interval: ConfidenceInterval;
  readonly tStatistic: number;
  readonly degreesOfFreedom: number;
  /** Two-sided. */
  readonly pValue: number;
  /** Mean difference over the standard deviation of the differences. */
  readonly dz: StandardisedDifference;
  /** Mean difference over the root mean of the two variances. */
  readonly dav: Estimable<StandardisedDifference>;
}>;

export interface StandardisedDifference {
  readonly estimate: number;
  /** With Hedges' correction for small samples. */
  readonly corrected: number;
  /** Large-sample, about the uncorrected estimate. */
  readonly interval: ConfidenceInterval;
}

/** `twoOneSidedTests(input)` and `twoOneSidedRatioTests(input)` give this. */
export interface EquivalenceTest {
  readonly lowerMargin: number;
  readonly upperMargin: number;
  readonly lowerTest: { readonly tStatistic: number; readonly pValue: number };
  readonly upperTest: { readonly tStatistic: number; readonly pValue: number };
  /** The larger of the two. */
  readonly pValue: number;
  /** At level 1 − 2·alpha; lies within the margins exactly when equivalence is shown. */
  readonly interval: ConfidenceInterval;
  readonly equivalent: boolean;
}

export interface EquivalenceInput {
  /** A difference; for the ratio form, the difference of mean logarithms. */
  readonly estimate: number;
  readonly standardError: number;
  readonly degreesOfFreedom: number;
  /** For the ratio form, ratios: lower < 1 < upper. */
  readonly lowerMargin: number;
  readonly upperMargin: number;
  readonly alpha: number;
}

/** `withinParticipantIntervals(table: Matrix, confidenceLevel?)` gives this, by condition. */
export type WithinParticipantIntervals = Estimable<{
  readonly participants: number;
  readonly conditions: readonly {
    readonly mean: number;
    readonly standardError: number;
    readonly interval: ConfidenceInterval;
  }[];
}>;

/** A contrast of mean logarithms carried back to the scale of the measure. */
export interface RatioEstimate {
  readonly ratio: number;
  readonly interval: ConfidenceInterval;
}
