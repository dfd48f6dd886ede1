import type { ConfidenceInterval, Estimable } from '../estimability.ts';
import type {
  EquivalenceTest,
  RatioEstimate,
  StandardisedDifference,
} from '../inference/inference-types.ts';
import type { AdjustedMean, ContrastEstimate, FTest } from '../models/period-adjusted-types.ts';
import type { RepeatedMeasuresAnova } from '../models/repeated-measures-types.ts';
import type { MeasurePlan, Scale } from '../protocol/protocol.ts';
import type { FriedmanTest } from '../ranks/rank-types.ts';
import type { Descriptives } from './descriptive-types.ts';
import type { ExclusionAccount } from './exclusion-types.ts';
import type { MissingData } from './missing-data.ts';
import type { ParticipantFlow } from './participant-flow.ts';

/**
 * Everything an analysis found, as plain JSON without NaN or infinity: what could not be estimated
 * says why. The same protocol, snapshot and seed give the same tree.
 */
export interface ResultTree {
  readonly participantFlow: ParticipantFlow;
  readonly exclusions: ExclusionAccount;
  /** In the protocol's order of measures. */
  readonly measures: readonly MeasureResult[];
}

/** What the registered plan foresaw is confirmatory; everything else is exploratory. */
export type Standing = 'confirmatory' | 'exploratory';

/**
 * How a participant's trials in one cell become one number:
 * - `mean`: arithmetic mean of the values
 * - `mean-logarithm`: mean of the natural logarithms (time-like)
 * - `rate`: total count over total exposure (counts with a measured exposure)
 * - `proportion`: share of yes (binary)
 * - `median`: median of the values (ordinal, for the rank methods)
 */
export type CellSummary = 'mean' | 'mean-logarithm' | 'rate' | 'proportion' | 'median';

export interface MeasureResult {
  readonly measure: string;
  readonly scale: Scale;
  readonly standing: Standing;
  /** Null for a measure that serves only as another's exposure. */
  readonly plan: MeasurePlan | null;
  readonly descriptives: Descriptives;
  readonly missing: MissingData;
  /** Null when there is no plan. */
  readonly method: MethodResult | null;
  readonly order: OrderResult;
}

/** What a method of analysis gives; other methods join this union. */
export type MethodResult = RepeatedMeasuresAnovaResult | FriedmanResult;

export interface RepeatedMeasuresAnovaResult {
  readonly method: 'repeated-measures-anova';
  readonly standing: Standing;
  readonly summary: CellSummary;
  readonly leftOut: LeftOut;
  readonly anova: RepeatedMeasuresAnova;
  /** Test of all conditions equal, adjusted for period, beside the test above. */
  readonly conditionAdjustedForPeriod: Estimable<FTest>;
  readonly comparisonSets: readonly ComparisonSet[];
}

export interface FriedmanResult {
  readonly method: 'friedman';
  readonly standing: Standing;
  readonly summary: CellSummary;
  readonly leftOut: LeftOut;
  readonly friedman: FriedmanTest;
  readonly comparisonSets: readonly ComparisonSet[];
}

/** Participants with data whom a method could not use, since it needs every condition. */
export interface LeftOut {
  /** With at least one value of the measure after exclusions. */
  readonly withData: number;
  readonly complete: number;
  readonly participants: readonly {
    readonly participantId: string;
    readonly missingConditions: readonly string[];
  }[];
}

/** All comparisons of conditions by one kind of estimate. */
export interface ComparisonSet {
  /** The plan's one primary estimate, or the other that stands beside it. */
  readonly use: 'primary' | 'sensitivity';
  readonly standing: Standing;
  readonly estimate: 'adjusted-for-period' | 'unadjusted';
  readonly basis: 'paired-t' | 'participant-condition-period-fit' | 'signed-rank';
  readonly multiplicity: 'holm' | 'bonferroni' | 'none';
  readonly alpha: number;
  /** Comparisons with a p-value, among which `adjustedPValue` is adjusted. */
  readonly familySize: number;
  readonly comparisons: readonly Comparison[];
}

/** First condition minus second, by key. */
export type Comparison = {
  readonly first: string;
  readonly second: string;
} & Estimable<ComparisonEstimate>;

export interface ComparisonEstimate {
  /** On the scale of the analysis: for time-like measures, of the logarithm. */
  readonly estimate: number;
  readonly standardError: number | null;
  /** Not adjusted for multiplicity, at 1 − alpha; null says that no such interval exists. */
  readonly interval: Estimable<ConfidenceInterval>;
  readonly statistic: ComparisonStatistic;
  readonly pValue: number;
  readonly adjustedPValue: number;
  /** Participants who gave both conditions, or all in the fit. */
  readonly participants: number;
  readonly effectSizes: EffectSizes;
  /** Back on the scale of the measure: a ratio of geometric means. Time-like measures only. */
  readonly ratio: Estimable<RatioEstimate> | null;
  /** Two one-sided tests; null when the plan claims no equivalence. */
  readonly equivalence: Estimable<EquivalenceTest> | null;
}

export type ComparisonStatistic =
  | { readonly kind: 't'; readonly value: number; readonly degreesOfFreedom: number }
  | {
      readonly kind: 'signed-rank';
      readonly positiveRankSum: number;
      readonly negativeRankSum: number;
      readonly zeroDifferences: number;
      readonly method: 'exact' | 'normal-approximation';
    };

export type EffectSizes =
  | {
      readonly kind: 'standardised-difference';
      readonly dz: StandardisedDifference;
      readonly dav: Estimable<StandardisedDifference>;
    }
  | { readonly kind: 'fit-standardised-difference'; readonly d: FitStandardisedDifference }
  | { readonly kind: 'rank-biserial'; readonly rankBiserial: number };

/**
 * An adjusted difference over √2 · the residual standard deviation: the standard deviation of a
 * difference of two conditions within a participant, as the fit has it.
 */
export interface FitStandardisedDifference {
  readonly estimate: number;
  readonly interval: ConfidenceInterval;
}

/** What order did, whatever the method of the measure. */
export interface OrderResult {
  readonly standing: Standing;
  readonly summary: CellSummary;
  /**
   * True for binary, ordinal and count measures: least squares treats them as if they were
   * continuous, an approximation good enough to see order but not to model the measure.
   */
  readonly approximation: boolean;
  /** response ~ participant + condition + period */
  readonly fit: Estimable<OrderFit>;
}

export interface OrderFit {
  readonly observations: number;
  readonly participants: number;
  readonly residualDegreesOfFreedom: number;
  readonly residualStandardDeviation: number;
  /** Conditions and periods of which the data could not tell the effect from the others. */
  readonly notSeparable: {
    readonly conditions: readonly string[];
    readonly periods: readonly number[];
  };
  readonly conditionTest: Estimable<FTest>;
  readonly conditionMeans: readonly ({ readonly condition: string } & Estimable<AdjustedMean>)[];
  readonly periodTest: Estimable<FTest>;
  readonly periodMeans: readonly ({ readonly period: number } & Estimable<AdjustedMean>)[];
  /** Change per period. */
  readonly linearTrend: Estimable<ContrastEstimate>;
}
