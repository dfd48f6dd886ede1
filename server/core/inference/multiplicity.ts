import { assertProbability } from '../distributions/quantile-search.ts';
import type { MultiplicityMethod } from './inference-types.ts';

/**
 * p-values adjusted for the number of tests, in the order given; compare each with alpha.
 *
 * - `holm`: Holm 1979 (Scand. J. Stat. 6:65), step-down; controls the family-wise error rate under
 *   any dependence and is never larger than Bonferroni's.
 * - `bonferroni`: Dunn 1961 (J. Am. Stat. Assoc. 56:52), p times the number of tests, at most 1.
 * - `none`: as given.
 *
 * @throws {DomainError} when a value is not a probability
 */
export function adjustPValues(pValues: readonly number[], method: MultiplicityMethod): number[] {
  pValues.forEach(assertProbability);
  const tests = pValues.length;
  if (method === 'none') return [...pValues];
  if (method === 'bonferroni') return pValues.map((p) => Math.min(1, p * tests));
  const order = pValues.map((_, index) => index).sort((i, j) => pValues[i]! - pValues[j]!);
  const adjusted = new Array<number>(tests);
  let largest = 0;
  order.forEach((index, step) => {
    largest = Math.max(largest, Math.min(1, pValues[index]! * (tests - step)));
    adjusted[index] = largest;
  });
  return adjusted;
}
