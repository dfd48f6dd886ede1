import type { DesignEfficiency } from '../efficiency.ts';
import type { SequenceLimits } from './sequence-rules.ts';

/** A difference between two conditions' effects, and how much its variance counts. */
export interface WeightedPair {
  /** Condition indices, different. */
  readonly first: number;
  readonly second: number;
  /** From 0 to 10⁹. */
  readonly weight: number;
}

/** What the search minimises: the weighted average variance of these differences, over σ². */
export interface SearchCriterion {
  /** Whether first-order carryover effects are in the model with participants and periods. */
  readonly carryoverInModel: boolean;
  /** Differences of direct effects, adjusted for carryover when it is in the model. */
  readonly direct: readonly WeightedPair[];
  /** Differences of first-order carryover effects; empty when carryover is not in the model. */
  readonly carryover: readonly WeightedPair[];
}

export interface SearchRequest {
  /** The conditions; an index is the place in this array. */
  readonly conditionKeys: readonly string[];
  readonly periods: number;
  /** How many sequences to find, one participant each. */
  readonly sequenceCount: number;
  readonly limits: SequenceLimits;
  readonly criterion: SearchCriterion;
  /**
   * Sequences that are there already and stay as they are, one participant each; a row that ends
   * early is a participant who withdrew. Their information counts, the limits do not bind them.
   */
  readonly given?: readonly (readonly number[])[];
  /** Where to begin; drawn at random when absent. */
  readonly start?: readonly (readonly number[])[];
  /** 16 lower-case hexadecimal digits. */
  readonly seed: string;
  /** How many changes may be weighed, those that break a constraint included; at least 1. */
  readonly evaluationsMax: number;
}

export interface SearchControls {
  /** Called at most a hundred times, with the share of evaluations used and the best efficiency. */
  readonly onProgress?: (fraction: number, bestEfficiency: number) => void;
  /** Asked before a participant's moves are weighed and before a design is judged as a whole. */
  readonly shouldStop?: () => boolean;
}

/** The best so far after a number of evaluations. */
export interface SearchStep {
  readonly evaluations: number;
  /** Weighted average variance, over σ². */
  readonly averageVariance: number;
  /** The same average in the ideal layout with this replication, over it. */
  readonly efficiency: number;
}

export type SearchFaultCode =
  | 'size-out-of-range'
  | 'repeated-condition'
  | 'malformed-seed'
  | 'malformed-budget'
  | 'malformed-weight'
  | 'carryover-not-in-model'
  | 'nothing-to-minimise'
  | 'condition-in-no-comparison'
  | 'malformed-sequence'
  | 'start-breaks-constraints'
  | 'unknown-condition'
  | 'unknown-period'
  | 'malformed-times'
  | 'contradictory-constraints'
  | 'more-periods-than-can-be-filled'
  | 'filling-undecided'
  | 'too-few-sequences'
  | 'comparisons-not-estimable'
  | 'comparisons-not-reached';

/** Why there is no answer, and what would give one. */
export interface SearchFault {
  readonly code: SearchFaultCode;
  readonly message: string;
  readonly remedy: string;
}

/**
 * - `budget`: all evaluations are used
 * - `caller`: `shouldStop` said so
 */
export type SearchStop = 'budget' | 'caller';

export interface SearchResult {
  readonly found: true;
  /** Rows of condition indices, `sequenceCount` of `periods`, without the given ones. */
  readonly sequences: number[][];
  /** Efficiencies of found and given sequences together, from `designEfficiency`. */
  readonly efficiencies: DesignEfficiency;
  /** The criterion, from the same independent computation. */
  readonly averageVariance: number;
  readonly efficiency: number;
  /** From the start to the end, at most 102 steps; the variance never rises. */
  readonly history: readonly SearchStep[];
  readonly stoppedBy: SearchStop;
  readonly evaluations: number;
  /**
   * Recomputations from scratch, and the largest relative difference of the criterion from the
   * updated one that they found.
   */
  readonly recomputations: number;
  readonly largestDrift: number;
}

export type SearchOutcome =
  | SearchResult
  | { readonly found: false; readonly faults: readonly SearchFault[] };
