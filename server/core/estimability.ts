/**
 * Why something could not be estimated. One list for the whole core, so that a report can explain
 * every code; add to it, never reuse a code with another meaning.
 *
 * - `incomplete-data`: a participant lacks a value in a cell the method needs
 * - `too-few-participants`, `too-few-conditions`, `too-few-periods`, `too-few-observations`
 * - `constant-response`: every value is the same
 * - `zero-error-variance`: the error term is zero within rounding, so no ratio can be formed
 * - `no-error-degrees-of-freedom`: as many parameters as observations
 * - `empty-between-cell`: a combination of between-factor levels has no participant
 * - `confounded-with-period`, `confounded-with-condition`: the data cannot tell the two apart
 * - `rank-deficient`: some, but not all, of the comparison can be estimated
 * - `disconnected`: the sequences of a design do not determine the comparison
 * - `singular-covariance`: a determinant is zero within rounding, or n is too small for it
 * - `undefined-correction`: the formula's denominator is zero within rounding
 * - `all-differences-zero`, `all-values-tied`
 * - `non-positive-value`: a logarithm is needed and a value is zero or below
 * - `out-of-range`: a value, setting or result lies beyond what the arithmetic can carry
 * - `attainable-confidence-too-low`: so few pairs that no interval reaches the level asked for
 */
export type NotEstimableReason =
  | 'incomplete-data'
  | 'too-few-participants'
  | 'too-few-conditions'
  | 'too-few-periods'
  | 'too-few-observations'
  | 'constant-response'
  | 'zero-error-variance'
  | 'no-error-degrees-of-freedom'
  | 'empty-between-cell'
  | 'confounded-with-period'
  | 'confounded-with-condition'
  | 'rank-deficient'
  | 'disconnected'
  | 'singular-covariance'
  | 'undefined-correction'
  | 'all-differences-zero'
  | 'all-values-tied'
  | 'non-positive-value'
  | 'out-of-range'
  | 'attainable-confidence-too-low';

/** Stands where a number cannot: says why, in a code for programs and a sentence for people. */
export interface NotEstimable {
  readonly estimable: false;
  readonly reason: NotEstimableReason;
  readonly detail: string;
}

/** A result, or the reason why there is none. Narrow on `estimable`. */
export type Estimable<Result> = ({ readonly estimable: true } & Result) | NotEstimable;

/** A {@link NotEstimable} with its reason and a full sentence. */
export function notEstimable(reason: NotEstimableReason, detail: string): NotEstimable {
  return { estimable: false, reason, detail };
}

/** An interval at a stated confidence level (0.95 for 95 %). */
export interface ConfidenceInterval {
  readonly level: number;
  readonly lower: number;
  readonly upper: number;
}
