import { type ConfidenceInterval, type Estimable, notEstimable } from '../../estimability.ts';
import { twoOneSidedRatioTests, twoOneSidedTests } from '../../inference/equivalence.ts';
import type {
  EquivalenceInput,
  EquivalenceTest,
  RatioEstimate,
} from '../../inference/inference-types.ts';
import { ratioFromLogDifference } from '../../inference/log-scale.ts';
import type { MeasurePlan } from '../../protocol/protocol.ts';
import type { CellSummary } from '../result-types.ts';

/** Ratios beyond e^±700 are at the end of what a double can hold. */
const LOG_RATIO_MAX = 700;

const beyondRange = notEstimable(
  'out-of-range',
  'An end of the interval is too far from 1 to be carried back from logarithms.',
);

/** A comparison of mean logarithms as a ratio; null on other scales. */
export function ratioOf(
  summary: CellSummary,
  estimate: number,
  interval: Estimable<ConfidenceInterval>,
): Estimable<RatioEstimate> | null {
  if (summary !== 'mean-logarithm') return null;
  if (!interval.estimable) return interval;
  const ends = [interval.lower, interval.upper];
  if (ends.some((end) => Math.abs(end) > LOG_RATIO_MAX)) return beyondRange;
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
  if (alpha >= 0.5) {
    const detail = 'Two one-sided tests need an alpha below one half.';
    return notEstimable('out-of-range', detail);
  }
  const found = test({ ...comparison, lowerMargin, upperMargin, alpha });
  return Number.isFinite(found.interval.upper) ? { estimable: true, ...found } : beyondRange;
}
