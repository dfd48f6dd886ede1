import type { notEstimable } from '../estimability.ts';
import { adjustPValues } from '../inference/multiplicity.ts';
import type { MeasurePlan } from '../protocol/protocol.ts';
import type { Comparison, ComparisonEstimate, ComparisonSet, Standing } from './result-types.ts';

/** Two conditions to compare: the estimate is first minus second. */
export interface ComparedPair {
  readonly first: string;
  readonly second: string;
}

/** An estimate before its p-value is adjusted within the family. */
export type UnadjustedEstimate = Omit<ComparisonEstimate, 'adjustedPValue'>;

/** What one comparison gave before adjustment. */
export type UnadjustedComparison = ComparedPair &
  (({ readonly estimable: true } & UnadjustedEstimate) | ReturnType<typeof notEstimable>);

/**
 * The pairs a plan compares: all of them, earlier condition first; or each other condition, first,
 * with the reference, second.
 *
 * @param conditionKeys in the order of the protocol, those that are compared: see
 *   `comparedConditions`
 */
export function comparedPairs(
  { contrasts }: MeasurePlan,
  conditionKeys: readonly string[],
): ComparedPair[] {
  if (contrasts.kind === 'against-reference') {
    const { reference } = contrasts;
    return conditionKeys
      .filter((key) => key !== reference)
      .map((first) => ({ first, second: reference }));
  }
  return conditionKeys.flatMap((first, index) =>
    conditionKeys.slice(index + 1).map((second) => ({ first, second })),
  );
}

/**
 * Puts comparisons into a set and adjusts their p-values within it. The family is every comparison
 * planned: one that cannot be estimated still counts, as if its p-value were 1, so that missing
 * data never makes the adjustment more lenient.
 */
export function comparisonSet(
  plan: MeasurePlan,
  set: Pick<ComparisonSet, 'estimate' | 'basis'>,
  planned: Standing,
  comparisons: readonly UnadjustedComparison[],
): ComparisonSet {
  const isPrimary = set.estimate === plan.primaryEstimate;
  const adjusted = adjustPValues(
    comparisons.map((comparison) => (comparison.estimable ? comparison.pValue : 1)),
    plan.multiplicity,
  );
  return {
    use: isPrimary ? 'primary' : 'sensitivity',
    // Only the one primary estimate was registered as the test of the conditions.
    standing: isPrimary ? planned : 'exploratory',
    ...set,
    multiplicity: plan.multiplicity,
    alpha: plan.alpha,
    familySize: comparisons.length,
    comparisons: comparisons.map(
      (comparison, index): Comparison =>
        comparison.estimable ? { ...comparison, adjustedPValue: adjusted[index]! } : comparison,
    ),
  };
}

/** The set that the plan names as primary first, then the one beside it. */
export function primaryFirst(sets: readonly ComparisonSet[]): ComparisonSet[] {
  return sets.toSorted((a, b) => Number(b.use === 'primary') - Number(a.use === 'primary'));
}
