import { fisherFSurvival } from '../distributions/fisher-f.ts';
import { studentTSurvivalQuantile, studentTTwoSided } from '../distributions/student-t.ts';
import { type Estimable, type NotEstimable, notEstimable } from '../estimability.ts';
import { assertConfidenceLevel } from '../numerics/confidence-level.ts';
import {
  applyQTranspose,
  householderQr,
  linearCombination,
  type QrFactorisation,
  solveFromQTranspose,
} from '../numerics/householder-qr.ts';
import { isRoundingOnly, largestMagnitude } from '../numerics/magnitude.ts';
import type { Matrix } from '../numerics/matrix.ts';
import type {
  AdjustedMean,
  ConditionDifference,
  ConditionFit,
  ContrastEstimate,
  FitRank,
  FTest,
  PeriodAdjustedFit,
  PeriodAdjustedOptions,
  PeriodEffects,
  PeriodObservations,
} from './period-adjusted-types.ts';
import { type DesignTerm, type PeriodDesign, periodDesign, termWeights } from './period-design.ts';

/**
 * Conditions compared within participants, with and without adjustment for period, by least
 * squares on response ~ participant + condition (+ period), every term fixed.
 *
 * Participants are absorbed, so the cost is linear in the observations; any imbalance or missing
 * value is allowed, and what the data cannot tell apart is reported, not guessed. Type III tests
 * adjust each of condition and period for the other. Adjusted means weigh participants, and
 * periods or conditions, equally, and their standard errors speak of these participants and
 * periods, not of a population. Conditions or periods without observations are left out of tests
 * and means, and named in `rank`.
 *
 * Source: Jones & Kenward, Design and Analysis of Cross-Over Trials, 3rd ed., ch. 5; estimable
 * functions as in Searle, Linear Models, 1971, §5.4.
 *
 * @throws {DomainError} when arrays differ in length, an index is out of range, a response is not
 *   finite or beyond 1e100, or the confidence level is not inside (0, 1)
 */
export function periodAdjustedFit(
  data: PeriodObservations,
  options: PeriodAdjustedOptions = {},
): PeriodAdjustedFit {
  const confidenceLevel = options.confidenceLevel ?? 0.95;
  assertConfidenceLevel(confidenceLevel);
  const magnitude = largestMagnitude(data.response);
  return {
    adjusted: leastSquaresFit(periodDesign(data, true), magnitude, confidenceLevel),
    unadjusted: leastSquaresFit(periodDesign(data, false), magnitude, confidenceLevel),
  };
}

/** What every estimate of one fit shares. */
interface Solved {
  readonly design: PeriodDesign;
  readonly qr: QrFactorisation;
  readonly coefficients: Float64Array;
  readonly variance: number;
  readonly residualSumOfSquares: number;
  readonly residualDegreesOfFreedom: number;
  readonly confidenceLevel: number;
  /** Student's t for the intervals. */
  readonly tCritical: number;
}

function leastSquaresFit(
  design: PeriodDesign,
  magnitude: number,
  confidenceLevel: number,
): ConditionFit {
  const shortage = shortageOf(design);
  if (shortage !== null) return shortage;
  const { condition, period, matrix, response, observations, participants } = design;
  const periodColumns = period?.columns ?? 0;
  // Conditions come last, so that their rows of Qᵀy hold what they add to period.
  const qr = householderQr(matrix, [periodColumns, condition.columns]);
  const qty = applyQTranspose(qr, response);
  const residualSumOfSquares = sumOfSquares(qty, qr.rank, observations);
  const residualDegreesOfFreedom = observations - participants - qr.rank;
  if (residualDegreesOfFreedom < 1) {
    return notEstimable(
      'no-error-degrees-of-freedom',
      `${observations} observations of ${participants} participants leave nothing for the error.`,
    );
  }
  if (isRoundingOnly(residualSumOfSquares, observations, magnitude)) {
    return notEstimable('zero-error-variance', 'The residuals are zero within rounding.');
  }
  const solved: Solved = {
    design,
    qr,
    coefficients: solveFromQTranspose(qr, qty),
    variance: residualSumOfSquares / residualDegreesOfFreedom,
    residualSumOfSquares,
    residualDegreesOfFreedom,
    confidenceLevel,
    tCritical: studentTSurvivalQuantile((1 - confidenceLevel) / 2, residualDegreesOfFreedom),
  };
  // The same columns with period last give period adjusted for conditions.
  const periodLast = householderQr(conditionsFirst(design), [condition.columns, periodColumns]);
  return {
    estimable: true,
    observations,
    participants,
    residualSumOfSquares,
    residualDegreesOfFreedom,
    residualStandardDeviation: Math.sqrt(solved.variance),
    rank: rankOf(design, qr),
    conditionTest: testOf(solved, condition, qr, periodLast.groupRanks[0]!, qty),
    conditionMeans: levelMeans(solved, condition).map(({ level, ...mean }) => ({
      conditionIndex: level,
      ...mean,
    })),
    conditionDifferences: differences(solved),
    period: period === null ? null : periodEffects(solved, period, periodLast),
  };
}

function shortageOf({ participants, condition, period }: PeriodDesign): NotEstimable | null {
  if (participants < 2) {
    return notEstimable(
      'too-few-participants',
      `Two participants with observations are needed; there are ${participants}.`,
    );
  }
  if (condition.observedLevels.length < 2) {
    return notEstimable('too-few-conditions', 'Fewer than two conditions have observations.');
  }
  if (period !== null && period.observedLevels.length < 2) {
    return notEstimable('too-few-periods', 'Fewer than two periods have observations.');
  }
  return null;
}

/** The design's columns with the condition columns moved before the period columns. */
function conditionsFirst({ matrix, condition }: PeriodDesign): Matrix {
  const { rows, columns } = matrix;
  const values = new Float64Array(rows * columns);
  for (let row = 0; row < rows; row += 1) {
    const source = matrix.values.subarray(row * columns, (row + 1) * columns);
    values.set(source.subarray(condition.firstColumn), row * columns);
    values.set(source.subarray(0, condition.firstColumn), row * columns + condition.columns);
  }
  return { rows, columns, values };
}

function sumOfSquares(values: Float64Array, from: number, to: number): number {
  let sum = 0;
  for (let index = from; index < to; index += 1) sum += values[index]! ** 2;
  return sum;
}

function rankOf({ matrix, condition, period }: PeriodDesign, qr: QrFactorisation): FitRank {
  const inTerm = (term: DesignTerm | null) => (column: number) =>
    term !== null && column >= term.firstColumn && column < term.firstColumn + term.columns;
  const droppedLevels = (term: DesignTerm | null) => {
    if (term === null) return [];
    const redundant = qr.dropped
      .filter(inTerm(term))
      .map((column) => term.observedLevels[column - term.firstColumn]!);
    const unobserved = Array.from({ length: term.levels }, (_, level) => level).filter(
      (level) => !term.observedLevels.includes(level),
    );
    return [...redundant, ...unobserved].sort((left, right) => left - right);
  };
  return {
    parameters: matrix.columns,
    rank: qr.rank,
    droppedConditions: droppedLevels(condition),
    droppedPeriods: droppedLevels(period),
  };
}

/**
 * The F test that all levels of a term are equal, from the factorisation with its columns last.
 *
 * @param rankAlone rank of the term's columns when nothing but participants is taken off
 * @param qty       Qᵀy of that factorisation
 */
function testOf(
  solved: Solved,
  term: DesignTerm,
  termLast: QrFactorisation,
  rankAlone: number,
  qty: Float64Array,
): Estimable<FTest> {
  const degreesOfFreedom = termLast.groupRanks[1]!;
  if (degreesOfFreedom === 0 && rankAlone > 0) {
    return term === solved.design.condition
      ? notEstimable('confounded-with-period', 'Conditions cannot be told apart from periods.')
      : notEstimable('confounded-with-condition', 'Periods cannot be told apart from conditions.');
  }
  if (degreesOfFreedom < term.columns) {
    return notEstimable(
      'rank-deficient',
      `Only ${degreesOfFreedom} of ${term.columns} comparisons among levels can be estimated.`,
    );
  }
  const sum = sumOfSquares(qty, termLast.rank - degreesOfFreedom, termLast.rank);
  const fStatistic = sum / degreesOfFreedom / solved.variance;
  return {
    estimable: true,
    sumOfSquares: sum,
    degreesOfFreedom,
    errorDegreesOfFreedom: solved.residualDegreesOfFreedom,
    fStatistic,
    pValue: fisherFSurvival(fStatistic, degreesOfFreedom, solved.residualDegreesOfFreedom),
    partialEtaSquared: sum / (sum + solved.residualSumOfSquares),
  };
}

function dot(left: Float64Array, right: Float64Array): number {
  return left.reduce((sum, value, index) => sum + value * right[index]!, 0);
}

/**
 * Adjusted means of a term's levels: the mean over participants of their intercepts, plus the
 * level's effect. The participants' mean responses are uncorrelated with the coefficients, so the
 * two variances add.
 */
function levelMeans(
  solved: Solved,
  term: DesignTerm,
): ({ readonly level: number } & Estimable<AdjustedMean>)[] {
  const { design, qr, coefficients, variance, tCritical, confidenceLevel } = solved;
  return Array.from({ length: term.levels }, (_, level) => {
    if (!term.observedLevels.includes(level)) {
      return { level, ...notEstimable('too-few-observations', 'This level has no observations.') };
    }
    const weights = termWeights(design, term, (other) => (other === level ? 1 : 0)).map(
      (weight, column) => weight - design.meanRow[column]!,
    );
    const { determined, varianceFactor } = linearCombination(qr, weights);
    if (!determined) {
      const detail = 'The data do not connect this level with the others.';
      return { level, ...notEstimable('rank-deficient', detail) };
    }
    const mean = design.meanResponse + dot(weights, coefficients);
    const standardError = Math.sqrt(variance * (varianceFactor + design.meanVarianceFactor));
    const half = tCritical * standardError;
    const interval = { level: confidenceLevel, lower: mean - half, upper: mean + half };
    return { level, estimable: true, mean, standardError, interval };
  });
}

function contrast(solved: Solved, weights: Float64Array): Estimable<ContrastEstimate> {
  const { qr, coefficients, variance, tCritical, confidenceLevel } = solved;
  const { determined, varianceFactor } = linearCombination(qr, weights);
  if (!determined) {
    return notEstimable('rank-deficient', 'The data do not determine this comparison.');
  }
  const estimate = dot(weights, coefficients);
  const standardError = Math.sqrt(variance * varianceFactor);
  const half = tCritical * standardError;
  const tStatistic = estimate / standardError;
  return {
    estimable: true,
    estimate,
    standardError,
    degreesOfFreedom: solved.residualDegreesOfFreedom,
    interval: { level: confidenceLevel, lower: estimate - half, upper: estimate + half },
    tStatistic,
    pValue: studentTTwoSided(tStatistic, solved.residualDegreesOfFreedom),
  };
}

function differences(solved: Solved): ConditionDifference[] {
  const term = solved.design.condition;
  const pairs: ConditionDifference[] = [];
  for (let first = 0; first < term.levels; first += 1) {
    for (let second = first + 1; second < term.levels; second += 1) {
      const observed = [first, second].every((level) => term.observedLevels.includes(level));
      const weightOf = (level: number) => Number(level === first) - Number(level === second);
      const result = observed
        ? contrast(solved, termWeights(solved.design, term, weightOf))
        : notEstimable('too-few-observations', 'One of the conditions has no observations.');
      pairs.push({ firstConditionIndex: first, secondConditionIndex: second, ...result });
    }
  }
  return pairs;
}

function periodEffects(
  solved: Solved,
  period: DesignTerm,
  periodLast: QrFactorisation,
): PeriodEffects {
  const { design, qr } = solved;
  const qty = applyQTranspose(periodLast, design.response);
  const centre =
    period.observedLevels.reduce((sum, level) => sum + level, 0) / (period.columns + 1);
  const spread = period.observedLevels.reduce((sum, level) => sum + (level - centre) ** 2, 0);
  const slope = termWeights(design, period, (level) => (level - centre) / spread);
  return {
    test: testOf(solved, period, periodLast, qr.groupRanks[0]!, qty),
    means: levelMeans(solved, period).map(({ level, ...mean }) => ({
      periodIndex: level,
      ...mean,
    })),
    linearTrend: contrast(solved, slope),
  };
}
