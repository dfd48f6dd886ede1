import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { periodAdjustedFit } from '#core/models/period-adjusted-fit.ts';
import type { ConditionFit, PeriodObservations } from '#core/models/period-adjusted-types.ts';
import { repeatedMeasuresAnova } from '#core/models/repeated-measures-anova.ts';
import { randomStream } from '#core/numerics/generator.ts';
import reference from '../../reference/period-adjusted-fit.json' with { type: 'json' };
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { expectRelative } from '../../support/relative.ts';

type Fitted = Extract<ConditionFit, { estimable: true }>;

function fitted(fit: ConditionFit): Fitted {
  if (!fit.estimable) throw new Error(fit.detail);
  return fit;
}

function estimated<Result>(result: Result & { readonly estimable: boolean }) {
  expect(result.estimable).toBe(true);
  return result as Extract<Result, { estimable: true }>;
}

interface ReferenceEstimate {
  readonly estimate: number;
  readonly standardError: number;
  readonly lower: number;
  readonly upper: number;
  readonly tStatistic: number;
  readonly pValue: number;
}
interface ReferenceTest {
  readonly sumOfSquares: number;
  readonly degreesOfFreedom: number;
  readonly fStatistic: number;
  readonly pValue: number;
}
interface ReferenceFit {
  readonly residualSumOfSquares: number;
  readonly residualDegreesOfFreedom: number;
  readonly conditionTest: ReferenceTest;
  readonly conditionMeans: readonly ReferenceEstimate[];
  readonly differences: readonly ReferenceEstimate[];
}

// Both sides are double precision: 1e-9 shows agreement. Estimates near zero are compared on the
// scale of their standard error.
const AGREEMENT = 1e-9;

function expectTest(test: Fitted['conditionTest'], expected: ReferenceTest): void {
  const own = estimated(test);
  expectRelative(own.sumOfSquares, expected.sumOfSquares, AGREEMENT, 'sum of squares');
  expect(own.degreesOfFreedom).toBe(expected.degreesOfFreedom);
  expectRelative(own.fStatistic, expected.fStatistic, AGREEMENT, 'F');
  expectRelative(own.pValue, expected.pValue, 1e-8, 'p');
}

function expectMeans(
  means: Fitted['conditionMeans'] | NonNullable<Fitted['period']>['means'],
  expected: readonly ReferenceEstimate[],
): void {
  expect(means.length).toBe(expected.length);
  means.forEach((mean, index) => {
    const own = estimated(mean);
    const other = expected[index]!;
    expectRelative(own.mean, other.estimate, AGREEMENT, 'mean');
    expectRelative(own.standardError, other.standardError, AGREEMENT, 'standard error');
    expectRelative(own.interval.lower, other.lower, 1e-8, 'lower');
    expectRelative(own.interval.upper, other.upper, 1e-8, 'upper');
  });
}

function expectContrast(
  contrast: Fitted['conditionDifferences'][number] | NonNullable<Fitted['period']>['linearTrend'],
  expected: ReferenceEstimate,
): void {
  const own = estimated(contrast);
  const error = expected.standardError;
  expectRelative(own.standardError, error, AGREEMENT, 'standard error');
  expect(Math.abs(own.estimate - expected.estimate) / error).toBeLessThan(AGREEMENT);
  expect(Math.abs(own.interval.lower - expected.lower) / error).toBeLessThan(AGREEMENT);
  expect(Math.abs(own.interval.upper - expected.upper) / error).toBeLessThan(AGREEMENT);
  expect(Math.abs(own.tStatistic - expected.tStatistic)).toBeLessThan(AGREEMENT);
  expectRelative(own.pValue, expected.pValue, 1e-8, 'p');
}

function expectFit(fit: ConditionFit, expected: ReferenceFit): void {
  const own = fitted(fit);
  expectRelative(own.residualSumOfSquares, expected.residualSumOfSquares, AGREEMENT, 'residual');
  expect(own.residualDegreesOfFreedom).toBe(expected.residualDegreesOfFreedom);
  expectTest(own.conditionTest, expected.conditionTest);
  expectMeans(own.conditionMeans, expected.conditionMeans);
  expect(own.conditionDifferences.length).toBe(expected.differences.length);
  own.conditionDifferences.forEach((difference, index) => {
    expectContrast(difference, expected.differences[index]!);
  });
}

// dataset: OrchardSprays (R package datasets), an 8 × 8 Latin square, whole and with gaps.
// reference: R 4.2.2, lm with drop1 and emmeans; tests/reference/period-adjusted-fit.R.
describe.each(reference.cases)('$name', (reference) => {
  const { adjusted, unadjusted } = periodAdjustedFit(reference);

  test('adjusted for period', () => {
    expectFit(adjusted, reference.adjusted);
    expect(fitted(adjusted).rank.droppedConditions).toEqual([]);
  });

  test('period: test, means and linear trend', () => {
    const period = fitted(adjusted).period;
    expectTest(period!.test, reference.adjusted.periodTest);
    expectMeans(period!.means, reference.adjusted.periodMeans);
    expectContrast(period!.linearTrend, reference.adjusted.linearTrend);
  });

  test('unadjusted', () => {
    expectFit(unadjusted, reference.unadjusted);
    expect(fitted(unadjusted).period).toBeNull();
  });

  test('permuting rows, adding to a participant, and noise of 1e-12', () => {
    const order = reference.response.map((_, index) => index).reverse();
    const permuted = periodAdjustedFit({
      ...reference,
      participantIndex: order.map((row) => reference.participantIndex[row]!),
      conditionIndex: order.map((row) => reference.conditionIndex[row]!),
      periodIndex: order.map((row) => reference.periodIndex[row]!),
      response: order.map((row) => reference.response[row]!),
    });
    const stream = randomStream('00000000000000aa', 2);
    const noise = () => 1e-12 * (stream.nextUniform() - 0.5);
    const noisy = periodAdjustedFit(changed((value) => value + noise()));
    const shifted = periodAdjustedFit(
      changed((value, row) => value + 100 * reference.participantIndex[row]!),
    );
    expectFit(permuted.adjusted, reference.adjusted);
    expectFit(noisy.adjusted, reference.adjusted);
    const own = fitted(shifted.adjusted);
    expectTest(own.conditionTest, reference.adjusted.conditionTest);
    expectTest(own.period!.test, reference.adjusted.periodTest);
    function changed(change: (value: number, row: number) => number): PeriodObservations {
      return { ...reference, response: reference.response.map(change) };
    }
  });
});

test('without period, complete data give the uncorrected repeated-measures F', () => {
  // dataset: OrchardSprays. Two independent paths of ours that theory says agree (design.md §7);
  // each is held to R elsewhere.
  const [square] = reference.cases;
  const table = Array.from({ length: 8 }, () => new Array<number>(8).fill(0));
  square!.response.forEach((value, row) => {
    table[square!.participantIndex[row]!]![square!.conditionIndex[row]!] = value;
  });
  const anova = repeatedMeasuresAnova({
    withinFactors: [{ key: 'condition', levelKeys: [...'abcdefgh'] }],
    betweenFactors: [],
    participants: table.map((values, row) => ({ key: `p${row}`, betweenLevelKeys: [], values })),
  });
  if (!anova.estimable || !anova.effects[0]?.estimable) throw new Error('should be estimable');
  const own = estimated(fitted(periodAdjustedFit(square!).unadjusted).conditionTest);
  expectRelative(own.fStatistic, anova.effects[0].fStatistic, 1e-11);
});

/** Rows of participant, condition, period and response. */
function observations(
  rows: readonly (readonly [number, number, number, number])[],
): PeriodObservations {
  const counts = [0, 1, 2].map((part) => Math.max(0, ...rows.map((row) => row[part]! + 1)));
  return {
    participantIndex: rows.map((row) => row[0]),
    conditionIndex: rows.map((row) => row[1]),
    periodIndex: rows.map((row) => row[2]),
    response: rows.map((row) => row[3]),
    participantCount: counts[0]!,
    conditionCount: counts[1]!,
    periodCount: counts[2]!,
  };
}

describe('designs that cannot tell things apart', () => {
  test('everyone in the same order: condition and period are confounded', () => {
    const rows = [0, 1, 2, 3].flatMap((participant) =>
      [0, 1, 2].map((k) => [participant, k, k, ((participant * 7 + k * 5) % 11) + k] as const),
    );
    const { adjusted, unadjusted } = periodAdjustedFit(observations(rows));
    const own = fitted(adjusted);
    expect(own.conditionTest).toMatchObject({ reason: 'confounded-with-period' });
    expect(own.period!.test).toMatchObject({ reason: 'confounded-with-condition' });
    expect(own.rank).toMatchObject({ parameters: 4, rank: 2, droppedConditions: [0, 1] });
    for (const difference of own.conditionDifferences) {
      expect(difference).toMatchObject({ estimable: false, reason: 'rank-deficient' });
    }
    expect(own.period!.linearTrend).toMatchObject({ reason: 'rank-deficient' });
    expect(fitted(unadjusted).conditionTest.estimable).toBe(true);
  });

  test('two sets of participants with separate conditions: only pairs within a set', () => {
    const rows = [0, 1, 2, 3, 4, 5].flatMap((participant) =>
      [0, 1].map((period) => {
        const condition = (participant < 3 ? 0 : 2) + ((participant + period) % 2);
        return [participant, condition, period, ((participant * 5 + period * 3) % 7) + 1] as const;
      }),
    );
    const own = fitted(periodAdjustedFit(observations(rows)).adjusted);
    expect(own.conditionTest).toMatchObject({ reason: 'rank-deficient' });
    const estimable = own.conditionDifferences
      .filter((difference) => difference.estimable)
      .map((difference) => [difference.firstConditionIndex, difference.secondConditionIndex]);
    expect(estimable).toEqual([
      [0, 1],
      [2, 3],
    ]);
    expect(own.conditionMeans.every((mean) => !mean.estimable)).toBe(true);
  });

  test('a condition and a period without observations are named and left out', () => {
    const { adjusted } = periodAdjustedFit({
      ...reference.cases[0]!,
      conditionCount: 9,
      periodCount: 9,
    });
    const own = fitted(adjusted);
    expect(own.rank).toMatchObject({ droppedConditions: [8], droppedPeriods: [8] });
    expect(own.conditionMeans[8]).toMatchObject({ reason: 'too-few-observations' });
    expect(own.period!.means[8]).toMatchObject({ reason: 'too-few-observations' });
    expectTest(own.conditionTest, reference.cases[0]!.adjusted.conditionTest);
  });

  test.each([
    [
      'too-few-participants',
      [
        [0, 0, 0, 1],
        [0, 1, 1, 2],
        [0, 0, 1, 4],
      ],
    ],
    [
      'too-few-conditions',
      [
        [0, 0, 0, 1],
        [0, 0, 1, 2],
        [1, 0, 0, 4],
      ],
    ],
    [
      'too-few-periods',
      [
        [0, 0, 0, 1],
        [0, 1, 0, 2],
        [1, 0, 0, 4],
        [1, 1, 0, 3],
      ],
    ],
    [
      'no-error-degrees-of-freedom',
      [
        [0, 0, 0, 1],
        [0, 1, 1, 2],
        [1, 0, 1, 4],
        [1, 1, 0, 4],
      ],
    ],
    [
      'zero-error-variance',
      [0, 1, 2, 3].flatMap((i) => [
        [i, i % 2, 0, i],
        [i, (i + 1) % 2, 1, i],
      ]),
    ],
  ] as [string, [number, number, number, number][]][])('%s', (reason, rows) => {
    const { adjusted } = periodAdjustedFit(observations(rows));
    expect(adjusted).toMatchObject({ estimable: false, reason });
  });

  test('no number is ever NaN or infinite, whatever is missing', () => {
    const index = fc.nat(3);
    const response = fc.oneof(fc.nat(3), fc.double({ min: -1e99, max: 1e99, noNaN: true }));
    const row = fc.tuple(index, index, index, response);
    fc.assert(
      fc.property(fc.array(row, { minLength: 1, maxLength: 25 }), (rows) => {
        expect(nonFinitePaths(periodAdjustedFit(observations(rows)))).toEqual([]);
      }),
      { numRuns: 500 },
    );
  });
});

test('bad input is refused', () => {
  const good = observations([
    [0, 0, 0, 1],
    [0, 1, 1, 2],
  ]);
  expect(() => periodAdjustedFit({ ...good, response: [1] })).toThrow(DomainError);
  expect(() => periodAdjustedFit({ ...good, response: [1, Number.NaN] })).toThrow(DomainError);
  expect(() => periodAdjustedFit({ ...good, conditionIndex: [0, 2] })).toThrow(DomainError);
  expect(() => periodAdjustedFit({ ...good, periodIndex: [0, 0.5] })).toThrow(DomainError);
  expect(() => periodAdjustedFit(good, { confidenceLevel: 95 })).toThrow(DomainError);
});
