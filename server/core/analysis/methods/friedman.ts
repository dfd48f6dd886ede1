import { notEstimable } from '../../estimability.ts';
import { matrixFromRows } from '../../numerics/matrix.ts';
import { comparedConditions } from '../../protocol/compared-conditions.ts';
import type { Measure } from '../../protocol/protocol.ts';
import { friedmanTest } from '../../ranks/friedman.ts';
import type { FriedmanTest } from '../../ranks/rank-types.ts';
import { signedRankTest } from '../../ranks/signed-rank.ts';
import { type ConditionRow, rankCellSummaryOf, valuesFault } from '../cell-summaries.ts';
import {
  type ComparedPair,
  comparedPairs,
  comparisonSet,
  primaryFirst,
  type UnadjustedComparison,
} from '../comparisons.ts';
import type { CellSummary, FriedmanResult } from '../result-types.ts';
import { type CompleteRow, completeRows, pairedCells } from './complete-rows.ts';
import { adjustedComparisons } from './fit-comparisons.ts';
import { ratioOf } from './logarithm-scale.ts';
import type { Method, MethodInput } from './method.ts';

/**
 * Friedman's test over participants with every condition, with signed-rank comparisons of pairs.
 * Ranks within participants cannot be adjusted for period, so the comparisons of the least-squares
 * fit with period stand beside them as sensitivity. Between factors are not in the test.
 */
export const friedman: Method & { readonly key: 'friedman' } = {
  key: 'friedman',
  run: (input): FriedmanResult => {
    const { data, measure, plan, standing } = input;
    const summary = rankCellSummaryOf(measure);
    const fault = valuesFault(input.participants, summary);
    const usable = fault === null ? input : { ...input, participants: [] };
    const { rows, complete, leftOut } = completeRows(usable, summary, (cell) =>
      withoutRoundingNoise(cell, measure, summary),
    );
    const conditionKeys = data.conditions.map(({ key }) => key);
    const signedRanks = comparisonSet(
      plan,
      { estimate: 'unadjusted', basis: 'signed-rank' },
      standing,
      comparedPairs(plan, comparedConditions(data.protocol.scheme, conditionKeys)).map((pair) =>
        fault === null
          ? signedRankDifference(input, summary, rows, conditionKeys, pair)
          : { ...pair, ...fault },
      ),
    );
    return {
      method: 'friedman',
      standing,
      summary,
      leftOut,
      friedman: fault ?? friedmanOf(complete),
      comparisonSets: primaryFirst([signedRanks, adjustedComparisons(input)]),
    };
  },
};

function friedmanOf(complete: readonly CompleteRow[]): FriedmanTest {
  if (complete.length === 0) {
    return notEstimable('too-few-participants', 'No participant gave every condition.');
  }
  return friedmanTest(matrixFromRows(complete.map(({ cells }) => cells)));
}

function signedRankDifference(
  { plan, measure }: MethodInput,
  summary: CellSummary,
  rows: readonly ConditionRow[],
  conditionKeys: readonly string[],
  pair: ComparedPair,
): UnadjustedComparison {
  const { first, second } = pairedCells(
    rows,
    conditionKeys.indexOf(pair.first),
    conditionKeys.indexOf(pair.second),
  );
  const differences = first.map((value, index) =>
    withoutRoundingNoise(value - second[index]!, measure, summary),
  );
  const found = signedRankTest(differences, { confidenceLevel: 1 - plan.alpha });
  if (!found.estimable) return { ...pair, ...found };
  const { hodgesLehmann: estimate, interval } = found;
  return {
    ...pair,
    estimable: true,
    estimate,
    standardError: null,
    interval: interval.estimable
      ? { estimable: true, level: interval.level, lower: interval.lower, upper: interval.upper }
      : interval,
    statistic: {
      kind: 'signed-rank',
      positiveRankSum: found.positiveRankSum,
      negativeRankSum: found.negativeRankSum,
      zeroDifferences: found.zeroDifferences,
      method: found.method,
    },
    pValue: found.pValue,
    participants: found.pairs,
    effectSizes: { kind: 'rank-biserial', rankBiserial: found.rankBiserial },
    ratio: ratioOf(summary, estimate, interval),
    equivalence: null,
  };
}

/** Decimal places kept beyond those of the measure: enough for means over many repetitions. */
const EXTRA_DECIMALS = 8;
/** Of logarithms: an error of 1e-10 in a logarithm is one of 1e-10 in a ratio. */
const LOGARITHM_DECIMALS = 10;

/**
 * A cell, or a difference of cells, rounded to so many decimals that only the noise of binary
 * arithmetic goes: 0.3 and 0.1 + 0.2 must count as tied.
 */
function withoutRoundingNoise(value: number, { decimals }: Measure, summary: CellSummary): number {
  const places = summary === 'mean-logarithm' ? LOGARITHM_DECIMALS : decimals + EXTRA_DECIMALS;
  const unit = 10 ** places;
  return Math.round(value * unit) / unit;
}
