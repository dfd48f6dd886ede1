import type { ConfidenceInterval, Estimable } from '../../estimability.ts';
import { twoOneSidedRatioTests, twoOneSidedTests } from '../../inference/equivalence.ts';
import type {
  EquivalenceInput,
  EquivalenceTest,
  RatioEstimate,
} from '../../inference/inference-types.ts';
import { ratioFromLogDifference } from '../../inference/log-scale.ts';
import type { MeasurePlan } from '../../protocol/protocol.ts';
import type { CellSummary } from '../result-types.ts';

/** A comparison of mean logarithms as a ratio; null on other scales. */
export function ratioOf(
  summary: CellSummary,
  estimate: number,
  interval: Estimable<ConfidenceInterval>,
): Estimable<RatioEstimate> | null {
  if (summary !== 'mean-logarithm') return null;
  if (!interval.estimable) return interval;
  return { estimable: true, ...ratioFromLogDifference(estimate, interval) };
}

/**
 * Two one-sided tests of a comparison against the margins of the plan; null when the plan has none.
 * The margins of a mean of logarithms are ratios. Not adjusted for the number of comparisons.
 */
export function equivalenceOf(
  { equivalence, alpha }: MeasurePlan,
  summary: CellSummary,
  comparison: Pick<EquivalenceInput, 'estimate' | 'standardError' | 'degreesOfFreedom'>,
): Estimable<EquivalenceTest> | null {
  if (equivalence === null) return null;
  const test = summary === 'mean-logarithm' ? twoOneSidedRatioTests : twoOneSidedTests;
  const { lower: lowerMargin, upper: upperMargin } = equivalence;
  return { estimable: true, ...test({ ...comparison, lowerMargin, upperMargin, alpha }) };
}
