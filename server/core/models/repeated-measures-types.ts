import type { Estimable } from '../estimability.ts';

/** A factor of the table, by key, with its level keys in order. */
export interface TableFactor {
  readonly key: string;
  readonly levelKeys: readonly string[];
}

/** One participant: level key by between factor, and one mean per cell of the within factors. */
export interface TableParticipant {
  readonly key: string;
  /** In the order of `betweenFactors`; empty when there are none. */
  readonly betweenLevelKeys: readonly string[];
  /** By cell, the last within factor varying fastest, as `conditionsOf`; null where missing. */
  readonly values: readonly (number | null)[];
}

/** One mean per participant and cell of the within factors. */
export interface RepeatedMeasuresTable {
  readonly withinFactors: readonly TableFactor[];
  readonly betweenFactors: readonly TableFactor[];
  readonly participants: readonly TableParticipant[];
}

export interface RepeatedMeasuresOptions {
  /**
   * Keys of between factors that were measured rather than manipulated (age group, site): their
   * variance joins the denominator of generalised eta squared. Default: none.
   */
  readonly measuredBetweenFactors?: readonly string[];
}

/** `repeatedMeasuresAnova(table, options?)` gives this. */
export type RepeatedMeasuresAnova = Estimable<{
  readonly participants: number;
  readonly groups: number;
  readonly conditions: number;
  /** Between effects first, then each within effect followed by its interactions with them. */
  readonly effects: readonly AnovaEffect[];
}>;

export type AnovaEffect = {
  /** Keys of the factors in the effect, between factors first. */
  readonly factors: readonly string[];
  readonly withinFactors: readonly string[];
  readonly betweenFactors: readonly string[];
} & Estimable<AnovaTest>;

export interface AnovaTest {
  readonly sumOfSquares: number;
  readonly degreesOfFreedom: number;
  readonly errorSumOfSquares: number;
  readonly errorDegreesOfFreedom: number;
  readonly fStatistic: number;
  /** Upper tail of F without correction for sphericity. */
  readonly pValue: number;
  readonly partialEtaSquared: number;
  readonly generalisedEtaSquared: number;
  readonly sphericity: Sphericity;
}

/**
 * Sphericity applies to effects with a within part of more than one degree of freedom; without it
 * the uncorrected test is the test.
 */
export type Sphericity =
  | { readonly applicable: false }
  | {
      readonly applicable: true;
      readonly mauchly: Estimable<MauchlyTest>;
      readonly greenhouseGeisser: CorrectedTest;
      readonly huynhFeldt: Estimable<CorrectedTest & { readonly rawEpsilon: number }>;
    };

export interface MauchlyTest {
  readonly w: number;
  readonly chiSquare: number;
  readonly degreesOfFreedom: number;
  readonly pValue: number;
}

/** An F test whose degrees of freedom are both multiplied by epsilon. */
export interface CorrectedTest {
  /** At most 1. */
  readonly epsilon: number;
  readonly degreesOfFreedom: number;
  readonly errorDegreesOfFreedom: number;
  readonly pValue: number;
}
