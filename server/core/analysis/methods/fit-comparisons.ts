import { studentTSurvivalQuantile } from '../../distributions/student-t.ts';
import type { ConfidenceInterval } from '../../estimability.ts';
import type { ConditionFit, ContrastEstimate } from '../../models/period-adjusted-types.ts';
import { comparedConditions } from '../../protocol/compared-conditions.ts';
import {
  type ComparedPair,
  comparedPairs,
  comparisonSet,
  type UnadjustedComparison,
} from '../comparisons.ts';
import type { ComparisonSet, FitStandardisedDifference } from '../result-types.ts';
import { equivalenceOf, ratioOf } from './logarithm-scale.ts';
import type { MethodInput } from './method.ts';

/** The plan's comparisons, adjusted for period, from participant + condition + period. */
export function adjustedComparisons(input: MethodInput): ComparisonSet {
  const conditionKeys = input.data.conditions.map(({ key }) => key);
  const compared = comparedConditions(input.data.protocol.scheme, conditionKeys);
  const comparisons = comparedPairs(input.plan, compared).map((pair) =>
    adjustedComparison(input, conditionKeys, pair),
  );
  return comparisonSet(
    input.plan,
    { estimate: 'adjusted-for-period', basis: 'participant-condition-period-fit' },
    input.standing,
    comparisons,
  );
}

function adjustedComparison(
  { fit, plan, fitSummary }: MethodInput,
  conditionKeys: readonly string[],
  pair: ComparedPair,
): UnadjustedComparison {
  if (!fit.estimable) return { ...pair, ...fit };
  const contrast = contrastOf(
    fit,
    conditionKeys.indexOf(pair.first),
    conditionKeys.indexOf(pair.second),
  );
  if (!contrast.estimable) {
    return { ...pair, estimable: false, reason: contrast.reason, detail: contrast.detail };
  }
  const { estimate, standardError, degreesOfFreedom, interval, tStatistic, pValue } = contrast;
  return {
    ...pair,
    estimable: true,
    estimate,
    standardError,
    interval: { estimable: true, ...interval },
    statistic: { kind: 't', value: tStatistic, degreesOfFreedom },
    pValue,
    participants: fit.participants,
    effectSizes: {
      kind: 'fit-standardised-difference',
      d: fitStandardisedDifference(contrast, fit.residualStandardDeviation, 1 - plan.alpha),
    },
    ratio: ratioOf(fitSummary, estimate, { estimable: true, ...interval }),
    equivalence: equivalenceOf(plan, fitSummary, { estimate, standardError, degreesOfFreedom }),
  };
}

/** First minus second, whichever way round the fit holds the pair. */
function contrastOf(
  fit: Extract<ConditionFit, { estimable: true }>,
  first: number,
  second: number,
): (typeof fit.conditionDifferences)[number] {
  const [low, high] = first < second ? [first, second] : [second, first];
  const found = fit.conditionDifferences.find(
    ({ firstConditionIndex, secondConditionIndex }) =>
      firstConditionIndex === low && secondConditionIndex === high,
  )!;
  if (!found.estimable || first === low) return found;
  const { lower, upper } = found.interval;
  return {
    ...found,
    firstConditionIndex: first,
    secondConditionIndex: second,
    estimate: -found.estimate,
    tStatistic: -found.tStatistic,
    interval: { ...found.interval, lower: -upper, upper: -lower },
  };
}

/**
 * An adjusted difference over √2 · the residual standard deviation, which is the standard deviation
 * of a difference of two conditions within a participant under the fit. Interval by the delta
 * method: var(d) ≈ var(difference)/s² + d²/(2ν), ν the residual degrees of freedom. This is
 * what R's emmeans::eff_size computes, which the tests hold it to.
 */
function fitStandardisedDifference(
  { estimate, standardError, degreesOfFreedom }: ContrastEstimate,
  residualStandardDeviation: number,
  level: number,
): FitStandardisedDifference {
  const unit = Math.SQRT2 * residualStandardDeviation;
  const d = estimate / unit;
  const spread = Math.hypot(standardError / unit, d / Math.sqrt(2 * degreesOfFreedom));
  const half = studentTSurvivalQuantile((1 - level) / 2, degreesOfFreedom) * spread;
  const interval: ConfidenceInterval = { level, lower: d - half, upper: d + half };
  return { estimate: d, interval };
}
