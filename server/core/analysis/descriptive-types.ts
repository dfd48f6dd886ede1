import type { ConfidenceInterval, Estimable } from '../estimability.ts';
import type { CellSummary } from './result-types.ts';

/** Descriptive tables of one measure after exclusions. Cells without a value are in them too. */
export interface Descriptives {
  readonly overall: Summary;
  readonly byCondition: readonly ({ readonly condition: string } & { readonly summary: Summary })[];
  readonly byPeriod: readonly { readonly period: number; readonly summary: Summary }[];
  readonly byConditionAndPeriod: readonly {
    readonly condition: string;
    readonly period: number;
    readonly summary: Summary;
  }[];
  readonly bySiteAndCondition: readonly {
    readonly siteId: string;
    readonly condition: string;
    readonly summary: Summary;
  }[];
  /**
   * Morey (2008), on one number a participant and condition, of participants with every condition;
   * carried back to the measure's scale when the analysis works on logarithms.
   */
  readonly withinParticipantIntervals: {
    readonly cellSummary: CellSummary;
    readonly level: number;
    readonly intervals: Estimable<{
      readonly participants: number;
      readonly conditions: readonly {
        readonly condition: string;
        /** A geometric mean for time-like measures. */
        readonly mean: number;
        readonly interval: ConfidenceInterval;
      }[];
    }>;
  };
}

/** The values of one cell: trials, not participant means, are summarised. */
export interface Summary {
  readonly participants: number;
  readonly trials: number;
  readonly distribution: Estimable<Distribution>;
  readonly ofScale: ScaleSummary;
}

export interface Distribution {
  readonly mean: number;
  /** Divisor n − 1; null when there is one value. */
  readonly standardDeviation: number | null;
  readonly minimum: number;
  readonly lowerQuartile: number;
  readonly median: number;
  readonly upperQuartile: number;
  readonly maximum: number;
}

/** What is added by scale. */
export type ScaleSummary =
  | { readonly scale: 'continuous' }
  | { readonly scale: 'time-like'; readonly geometricMean: Estimable<{ readonly mean: number }> }
  | {
      readonly scale: 'count';
      readonly rate: Estimable<{
        readonly total: number;
        readonly exposure: number;
        /** Null when the exposure is the trial itself. */
        readonly exposureUnit: string | null;
        readonly rate: number;
      }>;
    }
  | { readonly scale: 'binary'; readonly proportion: Estimable<ProportionSummary> }
  | {
      readonly scale: 'ordinal';
      readonly points: readonly {
        readonly value: number;
        readonly label: string;
        readonly trials: number;
      }[];
    };

export interface ProportionSummary {
  readonly successes: number;
  readonly trials: number;
  readonly proportion: number;
  /** Wilson (1927) score interval, trials taken as independent. */
  readonly interval: ConfidenceInterval;
}
