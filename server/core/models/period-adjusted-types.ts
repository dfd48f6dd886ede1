import type { ConfidenceInterval, Estimable } from '../estimability.ts';

/**
 * Observations as parallel arrays of one length, one entry per trial or per participant × period
 * mean. Every index counts from 0. Nothing need be balanced or complete.
 */
export interface PeriodObservations {
  readonly participantIndex: ArrayLike<number>;
  readonly conditionIndex: ArrayLike<number>;
  readonly periodIndex: ArrayLike<number>;
  readonly response: ArrayLike<number>;
  readonly participantCount: number;
  readonly conditionCount: number;
  readonly periodCount: number;
}

export interface PeriodAdjustedOptions {
  /** Of every interval. Default 0.95. */
  readonly confidenceLevel?: number;
}

/** `periodAdjustedFit(observations, options?)` gives this: both fits, side by side. */
export interface PeriodAdjustedFit {
  /** response ~ participant + condition + period */
  readonly adjusted: ConditionFit;
  /** response ~ participant + condition */
  readonly unadjusted: ConditionFit;
}

export type ConditionFit = Estimable<{
  readonly observations: number;
  /** Participants with at least one observation. */
  readonly participants: number;
  readonly residualSumOfSquares: number;
  readonly residualDegreesOfFreedom: number;
  readonly residualStandardDeviation: number;
  readonly rank: FitRank;
  /** All conditions equal, type III: adjusted for period where the fit contains period. */
  readonly conditionTest: Estimable<FTest>;
  readonly conditionMeans: readonly ConditionMean[];
  /** All pairs a < b in condition order; the difference is first − second. */
  readonly conditionDifferences: readonly ConditionDifference[];
  /** Null in the fit without period. */
  readonly period: PeriodEffects | null;
}>;

export interface FitRank {
  /** Parameters beyond one mean per participant. */
  readonly parameters: number;
  readonly rank: number;
  /** Indices (from 0) of conditions and periods whose parameter was dropped as redundant. */
  readonly droppedConditions: readonly number[];
  readonly droppedPeriods: readonly number[];
}

export interface FTest {
  readonly sumOfSquares: number;
  readonly degreesOfFreedom: number;
  readonly errorDegreesOfFreedom: number;
  readonly fStatistic: number;
  readonly pValue: number;
  readonly partialEtaSquared: number;
}

export type ConditionMean = { readonly conditionIndex: number } & Estimable<AdjustedMean>;
export type PeriodMean = { readonly periodIndex: number } & Estimable<AdjustedMean>;

/** A mean with participants, and periods or conditions, weighted equally. */
export interface AdjustedMean {
  readonly mean: number;
  readonly standardError: number;
  readonly interval: ConfidenceInterval;
}

export type ConditionDifference = {
  readonly firstConditionIndex: number;
  readonly secondConditionIndex: number;
} & Estimable<ContrastEstimate>;

export interface ContrastEstimate {
  readonly estimate: number;
  readonly standardError: number;
  readonly degreesOfFreedom: number;
  readonly interval: ConfidenceInterval;
  readonly tStatistic: number;
  /** Two-sided, not adjusted for multiplicity. */
  readonly pValue: number;
}

export interface PeriodEffects {
  /** All periods equal, type III: adjusted for condition. */
  readonly test: Estimable<FTest>;
  readonly means: readonly PeriodMean[];
  /** Change of the response per period: the linear contrast of the adjusted period effects. */
  readonly linearTrend: Estimable<ContrastEstimate>;
}
