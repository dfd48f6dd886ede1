import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { twoOneSidedRatioTests, twoOneSidedTests } from '#core/inference/equivalence.ts';
import { geometricMean, logValues, ratioFromLogDifference } from '#core/inference/log-scale.ts';
import { adjustPValues } from '#core/inference/multiplicity.ts';
import { hedgesCorrection, pairedComparison } from '#core/inference/paired-comparison.ts';
import { withinParticipantIntervals } from '#core/inference/within-participant-intervals.ts';
import { matrixFromRows } from '#core/numerics/matrix.ts';
import reference from '../../reference/inference.json' with { type: 'json' };
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { expectRelative } from '../../support/relative.ts';

// dataset: sleep (R package datasets), ergoStool (R package nlme).
// reference: R 4.2.2, tests/reference/inference.R. Double precision on both sides.
const AGREEMENT = 1e-11;

describe('multiplicity', () => {
  test('Holm and Bonferroni, in the order given', () => {
    const { p, holm, bonferroni } = reference.multiplicity;
    adjustPValues(p, 'holm').forEach((value, index) => {
      expectRelative(value, holm[index]!, 1e-14);
    });
    adjustPValues(p, 'bonferroni').forEach((value, index) => {
      expectRelative(value, bonferroni[index]!, 1e-14);
    });
    expect(adjustPValues(p, 'none')).toEqual(p);
  });

  test('Holm lies between the raw value and Bonferroni, and keeps the order of p', () => {
    const probabilities = fc.array(fc.double({ min: 0, max: 1, noNaN: true }), { maxLength: 12 });
    fc.assert(
      fc.property(probabilities, (p) => {
        const holm = adjustPValues(p, 'holm');
        const bonferroni = adjustPValues(p, 'bonferroni');
        holm.forEach((value, i) => {
          expect(value >= p[i]! && value <= bonferroni[i]!).toBe(true);
          holm.forEach((other, j) => {
            if (p[i]! <= p[j]!) expect(value).toBeLessThanOrEqual(other);
          });
        });
      }),
    );
  });

  test('a value that is no probability is refused', () => {
    expect(() => adjustPValues([0.1, 1.2], 'holm')).toThrow(DomainError);
    expect(() => adjustPValues([Number.NaN], 'none')).toThrow(DomainError);
  });
});

describe('paired comparison', () => {
  const { paired } = reference;
  const result = pairedComparison(paired.first, paired.second);

  test('difference, interval, t and p', () => {
    if (!result.estimable) throw new Error(result.detail);
    expectRelative(result.meanDifference, paired.meanDifference, AGREEMENT);
    expectRelative(result.standardDeviation, paired.standardDeviation, AGREEMENT);
    expectRelative(result.standardError, paired.standardError, AGREEMENT);
    expectRelative(result.interval.lower, paired.lower, AGREEMENT);
    expectRelative(result.interval.upper, paired.upper, AGREEMENT);
    expectRelative(result.tStatistic, paired.tStatistic, AGREEMENT);
    expect(result.degreesOfFreedom).toBe(paired.degreesOfFreedom);
    expectRelative(result.pValue, paired.pValue, AGREEMENT);
  });

  test('standardised differences', () => {
    if (!result.estimable || !result.dav.estimable) throw new Error('should be estimable');
    const halfOf = ({ lower, upper }: { lower: number; upper: number }) => (upper - lower) / 2;
    expectRelative(result.dz.estimate, paired.dz, AGREEMENT);
    expectRelative(result.dz.corrected, paired.dz * paired.hedges, AGREEMENT);
    expectRelative(halfOf(result.dz.interval), paired.dzHalf, AGREEMENT);
    expectRelative(result.dav.estimate, paired.dav, AGREEMENT);
    expectRelative(result.dav.corrected, paired.dav * paired.hedges, AGREEMENT);
    expectRelative(halfOf(result.dav.interval), paired.davHalf, AGREEMENT);
  });

  test("Hedges' correction against the closed form", () => {
    // published: Hedges 1981; for m = 2, J = Γ(1)/Γ(½) = 1/√π. Approximately 1 − 3/(4m − 1).
    expectRelative(hedgesCorrection(2), 1 / Math.sqrt(Math.PI), 1e-14);
    expectRelative(hedgesCorrection(50), 1 - 3 / 199, 1e-4);
    expect(hedgesCorrection(1)).toBe(0);
  });

  test('what cannot be estimated, and bad input', () => {
    expect(pairedComparison([1], [2])).toMatchObject({ reason: 'too-few-participants' });
    expect(pairedComparison([1, 2], [2, 3])).toMatchObject({ reason: 'zero-error-variance' });
    expect(() => pairedComparison([1, 2], [2])).toThrow(DomainError);
    expect(() => pairedComparison([1, Number.NaN], [2, 3])).toThrow(DomainError);
    expect(() => pairedComparison([1, 2], [2, 4], { confidenceLevel: 0 })).toThrow(DomainError);
    const two = pairedComparison([1, 2], [2, 5]);
    expect(two.estimable).toBe(true);
    expect(nonFinitePaths(two)).toEqual([]);
  });
});

describe('equivalence', () => {
  const { paired, equivalence, ratio } = reference;

  test('a difference: two one-sided tests and the 90 % interval', () => {
    const { lowerMargin, upperMargin, alpha } = equivalence;
    const result = twoOneSidedTests({
      estimate: paired.meanDifference,
      standardError: paired.standardError,
      degreesOfFreedom: paired.degreesOfFreedom,
      lowerMargin,
      upperMargin,
      alpha,
    });
    expectRelative(result.lowerTest.tStatistic, equivalence.lowerT, AGREEMENT);
    expectRelative(result.lowerTest.pValue, equivalence.lowerP, AGREEMENT);
    expectRelative(result.upperTest.tStatistic, equivalence.upperT, AGREEMENT);
    expectRelative(result.upperTest.pValue, equivalence.upperP, AGREEMENT);
    expectRelative(result.interval.lower, equivalence.intervalLower, AGREEMENT);
    expectRelative(result.interval.upper, equivalence.intervalUpper, AGREEMENT);
    expect(result.pValue).toBe(Math.max(result.lowerTest.pValue, result.upperTest.pValue));
  });

  test('a ratio, from logarithms', () => {
    const result = twoOneSidedRatioTests(ratio);
    expectRelative(result.lowerTest.pValue, ratio.lowerP, AGREEMENT);
    expectRelative(result.upperTest.pValue, ratio.upperP, AGREEMENT);
    expectRelative(result.interval.lower, ratio.intervalLower, AGREEMENT);
    expectRelative(result.interval.upper, ratio.intervalUpper, AGREEMENT);
    expect(result).toMatchObject({ lowerMargin: 0.8, upperMargin: 1.25 });
  });

  test('shown exactly when the interval lies within the margins', () => {
    const number = fc.double({ min: -3, max: 3, noNaN: true });
    const error = fc.double({ min: 0.01, max: 2, noNaN: true });
    fc.assert(
      fc.property(number, error, fc.integer({ min: 1, max: 60 }), (estimate, standardError, df) => {
        const result = twoOneSidedTests({
          estimate,
          standardError,
          degreesOfFreedom: df,
          lowerMargin: -1,
          upperMargin: 1.5,
          alpha: 0.05,
        });
        const { lower, upper } = result.interval;
        fc.pre(Math.abs(lower + 1) > 1e-9 && Math.abs(upper - 1.5) > 1e-9);
        expect(result.equivalent).toBe(lower > -1 && upper < 1.5);
      }),
    );
  });

  test('bad input is refused', () => {
    const good = {
      estimate: 0.1,
      standardError: 0.1,
      degreesOfFreedom: 5,
      lowerMargin: 0.8,
      upperMargin: 1.2,
      alpha: 0.05,
    };
    for (const change of [
      { standardError: 0 },
      { lowerMargin: 2 },
      { alpha: 0.5 },
      { degreesOfFreedom: 0 },
      { estimate: Number.NaN },
    ]) {
      expect(() => twoOneSidedTests({ ...good, ...change })).toThrow(DomainError);
    }
    expect(() => twoOneSidedRatioTests({ ...good, upperMargin: 0.9 })).toThrow(DomainError);
  });
});

describe('within-participant intervals', () => {
  const { within } = reference;

  test('means, errors and intervals with the correction of Morey 2008', () => {
    const result = withinParticipantIntervals(matrixFromRows(within.table));
    if (!result.estimable) throw new Error(result.detail);
    result.conditions.forEach(({ mean, standardError, interval }, index) => {
      expectRelative(mean, within.mean[index]!, AGREEMENT);
      expectRelative(standardError, within.standardError[index]!, AGREEMENT);
      expectRelative(interval.upper - mean, within.half[index]!, AGREEMENT);
    });
  });

  test('adding a constant to a participant leaves the widths alone', () => {
    const shifted = within.table.map((row, index) => row.map((value) => value + 100 * index));
    const result = withinParticipantIntervals(matrixFromRows(shifted));
    if (!result.estimable) throw new Error(result.detail);
    result.conditions.forEach(({ standardError }, index) => {
      expectRelative(standardError, within.standardError[index]!, AGREEMENT);
    });
  });

  test('what cannot be estimated, and bad input', () => {
    const of = (rows: number[][]) => withinParticipantIntervals(matrixFromRows(rows));
    expect(of([[1], [2]])).toMatchObject({ reason: 'too-few-conditions' });
    expect(of([[1, 2]])).toMatchObject({ reason: 'too-few-participants' });
    expect(
      of([
        [1, 2],
        [3, Number.NaN],
      ]),
    ).toMatchObject({ reason: 'incomplete-data' });
    expect(() =>
      of([
        [1, 2],
        [3, Number.POSITIVE_INFINITY],
      ]),
    ).toThrow(DomainError);
  });
});

describe('log scale', () => {
  const { ratio } = reference;

  test('geometric mean and ratio', () => {
    const mean = geometricMean(ratio.first);
    if (!mean.estimable) throw new Error(mean.detail);
    expectRelative(mean.mean, ratio.geometricMeanFirst, 1e-14);
    const back = ratioFromLogDifference(ratio.estimate, { level: 0.9, lower: -0.5, upper: 0 });
    expect(back).toEqual({
      ratio: Math.exp(ratio.estimate),
      interval: { level: 0.9, lower: Math.exp(-0.5), upper: 1 },
    });
  });

  test('zero and below have no logarithm; missing stays missing', () => {
    expect(logValues([1, 0, -2])).toMatchObject({ reason: 'non-positive-value' });
    expect(geometricMean([3, 0])).toMatchObject({ reason: 'non-positive-value' });
    expect(geometricMean([])).toMatchObject({ reason: 'too-few-observations' });
    const result = logValues([1, Number.NaN]);
    expect(result).toEqual({ estimable: true, values: Float64Array.of(0, Number.NaN) });
    expect(() => geometricMean([1, Number.NaN])).toThrow(DomainError);
    const interval = { level: 0.9, lower: 0, upper: 1 };
    expect(() => ratioFromLogDifference(701, interval)).toThrow(DomainError);
  });
});
