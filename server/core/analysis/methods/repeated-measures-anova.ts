import { notEstimable } from '../../estimability.ts';
import { pairedComparison } from '../../inference/paired-comparison.ts';
import { repeatedMeasuresAnova } from '../../models/repeated-measures-anova.ts';
import type { RepeatedMeasuresAnova, TableFactor } from '../../models/repeated-measures-types.ts';
import { comparedConditions } from '../../protocol/compared-conditions.ts';
import type { Factor } from '../../protocol/protocol.ts';
import { type ConditionRow, valuesFault } from '../cell-summaries.ts';
import {
  type ComparedPair,
  comparedPairs,
  comparisonSet,
  primaryFirst,
  type UnadjustedComparison,
} from '../comparisons.ts';
import type { LeftOut, RepeatedMeasuresAnovaResult } from '../result-types.ts';
import { type CompleteRow, completeRows, pairedCells } from './complete-rows.ts';
import { adjustedComparisons } from './fit-comparisons.ts';
import { equivalenceOf, ratioOf } from './logarithm-scale.ts';
import type { Method, MethodInput } from './method.ts';

/**
 * Repeated-measures analysis of variance of one number a participant and condition, over the within
 * and between factors of the protocol, with the condition test and comparisons adjusted for period
 * always beside it. The analysis of variance uses participants with every condition; a paired
 * comparison uses those with both of its conditions; the adjusted ones use every observation.
 */
export const repeatedMeasuresAnovaMethod: Method & { readonly key: 'repeated-measures-anova' } = {
  key: 'repeated-measures-anova',
  run: (input): RepeatedMeasuresAnovaResult => {
    const { data, plan, standing, fitSummary, fit } = input;
    const fault = valuesFault(input.participants, fitSummary);
    const usable = fault === null ? input : { ...input, participants: [] };
    const { rows, complete, leftOut } = completeRows(usable, fitSummary);
    const conditionKeys = data.conditions.map(({ key }) => key);
    const unadjusted = comparisonSet(
      plan,
      { estimate: 'unadjusted', basis: 'paired-t' },
      standing,
      comparedPairs(plan, comparedConditions(data.protocol.scheme, conditionKeys)).map((pair) =>
        fault === null ? pairedDifference(input, rows, conditionKeys, pair) : { ...pair, ...fault },
      ),
    );
    return {
      method: 'repeated-measures-anova',
      standing,
      summary: fitSummary,
      leftOut,
      anova: fault ?? anovaOf(input, complete, leftOut),
      conditionAdjustedForPeriod: fit.estimable ? fit.conditionTest : fit,
      comparisonSets: primaryFirst([adjustedComparisons(input), unadjusted]),
    };
  },
};

function anovaOf(
  { data }: MethodInput,
  complete: readonly CompleteRow[],
  leftOut: LeftOut,
): RepeatedMeasuresAnova {
  if (complete.length === 0) {
    const detail =
      leftOut.withData === 0
        ? 'No participant has a value.'
        : `None of the ${leftOut.withData} participants with data gave every condition.`;
    return notEstimable('too-few-participants', detail);
  }
  return repeatedMeasuresAnova({
    withinFactors: data.protocol.withinFactors.map(tableFactor),
    betweenFactors: data.protocol.betweenFactors.map(tableFactor),
    participants: complete.map(({ participant, cells }) => ({
      key: participant.frame.id,
      betweenLevelKeys: participant.betweenLevelKeys,
      values: cells,
    })),
  });
}

function tableFactor({ key, levels }: Factor): TableFactor {
  return { key, levelKeys: levels.map((level) => level.key) };
}

function pairedDifference(
  { plan, fitSummary }: MethodInput,
  rows: readonly ConditionRow[],
  conditionKeys: readonly string[],
  pair: ComparedPair,
): UnadjustedComparison {
  const { first, second } = pairedCells(
    rows,
    conditionKeys.indexOf(pair.first),
    conditionKeys.indexOf(pair.second),
  );
  const found = pairedComparison(first, second, { confidenceLevel: 1 - plan.alpha });
  if (!found.estimable) return { ...pair, ...found };
  const { meanDifference: estimate, standardError, degreesOfFreedom, interval } = found;
  return {
    ...pair,
    estimable: true,
    estimate,
    standardError,
    interval: { estimable: true, ...interval },
    statistic: { kind: 't', value: found.tStatistic, degreesOfFreedom },
    pValue: found.pValue,
    participants: found.pairs,
    effectSizes: { kind: 'standardised-difference', dz: found.dz, dav: found.dav },
    ratio: ratioOf(fitSummary, estimate, { estimable: true, ...interval }),
    equivalence: equivalenceOf(plan, fitSummary, { estimate, standardError, degreesOfFreedom }),
  };
}
