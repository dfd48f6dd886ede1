import { chiSquareSurvival } from '../distributions/chi-square.ts';
import { fisherFSurvival } from '../distributions/fisher-f.ts';
import { DomainError } from '../errors.ts';
import { notEstimable } from '../estimability.ts';
import { completeTableFault } from '../models/complete-table.ts';
import type { Matrix } from '../numerics/matrix.ts';
import { midRanks } from './mid-ranks.ts';
import type { FriedmanTest } from './rank-types.ts';

/** Kendall's W this close to 1 is 1: the F of Iman and Davenport divides by 1 − W. */
const CONCORDANCE_TOLERANCE = 1e-12;

/**
 * Friedman's test that the conditions are exchangeable within every participant.
 *
 * Chi-square with the correction for ties: Friedman 1937 (J. Am. Stat. Assoc. 32:675); Hollander &
 * Wolfe, Nonparametric Statistical Methods, 2nd ed., §7.1, (7.6). Kendall's W is it over n(k − 1).
 * The F of Iman & Davenport 1980 (Commun. Stat. A 9:571), (n − 1)·χ²/(n(k − 1) − χ²), keeps its
 * level better in small tables; both p-values are approximations. Assumes only that, under the
 * null, every order of a participant's values is equally likely; period effects break that unless
 * the design balances them.
 *
 * @param table participants × conditions; NaN marks a missing value
 * @returns the test, or why there is none
 * @throws {DomainError} when a value is infinite
 */
export function friedmanTest(table: Matrix): FriedmanTest {
  const { rows: participants, columns: conditions, values } = table;
  if (values.some((value) => Math.abs(value) === Number.POSITIVE_INFINITY)) {
    throw new DomainError('A table of measurements holds an infinite value.');
  }
  const fault = completeTableFault(table);
  if (fault !== null) return fault;
  // Twice the ranks are whole numbers, so sums are exact in any order of participants.
  const doubledSums = new Float64Array(conditions);
  let tieTerm = 0;
  for (let row = 0; row < participants; row += 1) {
    const { ranks, tieSizes } = midRanks(values.subarray(row * conditions, (row + 1) * conditions));
    for (let column = 0; column < conditions; column += 1) {
      doubledSums[column]! += 2 * ranks[column]!;
    }
    for (const size of tieSizes) tieTerm += size ** 3 - size;
  }
  const whole = participants * (conditions ** 3 - conditions);
  if (tieTerm === whole) {
    return notEstimable('all-values-tied', 'Every participant has the same value throughout.');
  }
  const centre = participants * (conditions + 1);
  const spread = doubledSums.reduce((sum, doubled) => sum + (doubled - centre) ** 2, 0) / 4;
  // W = 12·Σ(R − R̄)² / (n²(k³ − k) − n·Σ(t³ − t)), and χ² = n(k − 1)·W.
  const kendallsW = Math.min(1, (12 * spread) / (participants * (whole - tieTerm)));
  const chiSquare = participants * (conditions - 1) * kendallsW;
  const rankSums = Array.from(doubledSums, (doubled) => doubled / 2);
  return {
    estimable: true,
    participants,
    conditions,
    chiSquare,
    degreesOfFreedom: conditions - 1,
    pValue: chiSquareSurvival(chiSquare, conditions - 1),
    kendallsW,
    rankSums,
    meanRanks: rankSums.map((sum) => sum / participants),
    tied: tieTerm > 0,
    imanDavenport: imanDavenport(kendallsW, participants, conditions),
  };
}

function imanDavenport(kendallsW: number, participants: number, conditions: number) {
  if (1 - kendallsW < CONCORDANCE_TOLERANCE) {
    return notEstimable(
      'zero-error-variance',
      'All participants rank the conditions alike, so F has no finite value.',
    );
  }
  const degreesOfFreedom = conditions - 1;
  const errorDegreesOfFreedom = degreesOfFreedom * (participants - 1);
  const fStatistic = ((participants - 1) * kendallsW) / (1 - kendallsW);
  return {
    estimable: true as const,
    fStatistic,
    degreesOfFreedom,
    errorDegreesOfFreedom,
    pValue: fisherFSurvival(fStatistic, degreesOfFreedom, errorDegreesOfFreedom),
  };
}
