import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { signedRankTest } from '#core/ranks/signed-rank.ts';
import { walshAverage } from '#core/ranks/walsh-averages.ts';
import reference from '../../reference/ranks.json' with { type: 'json' };
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { expectRelative } from '../../support/relative.ts';

function estimated(differences: readonly number[], confidenceLevel = 0.95) {
  const result = signedRankTest(differences, { confidenceLevel });
  if (!result.estimable) throw new Error(result.detail);
  return result;
}

// published: depression scores, Hollander & Wolfe 1973, p. 29 f., the example of R's ?wilcox.test.
// dataset: sleep (R package datasets), ergoStool (R package nlme).
// reference: R 4.2.2 wilcox.test; for ties, listing of all signs; tests/reference/ranks.R.
describe.each(reference.signedRank)('$name', (expected) => {
  const result = estimated(expected.differences);

  test('statistic and p', () => {
    expect(result.positiveRankSum).toBe(expected.statistic);
    if (result.method === 'normal-approximation') {
      expectRelative(result.pValue, expected.approximatePValue, 1e-11);
    } else if (expected.exactPValue !== undefined) {
      expectRelative(result.pValue, expected.exactPValue, 1e-12);
    }
    if (expected.allSignsPValue !== undefined) {
      expectRelative(result.pValue, expected.allSignsPValue, 1e-12);
    }
    expect(
      result.method === 'normal-approximation' ||
        expected.exactPValue !== undefined ||
        expected.allSignsPValue !== undefined,
    ).toBe(true);
  });

  test('Hodges–Lehmann estimate and interval', () => {
    expectRelative(result.hodgesLehmann, expected.medianWalsh, 1e-14);
    if (expected.lower === undefined) return;
    if (!result.interval.estimable) throw new Error('should be estimable');
    expectRelative(result.hodgesLehmann, expected.hodgesLehmann!, 1e-14);
    expectRelative(result.interval.lower, expected.lower, 1e-14);
    expectRelative(result.interval.upper, expected.upper!, 1e-14);
  });

  test('rank-biserial from its definition, and reflection', () => {
    // published: Kerby 2014, (favourable − unfavourable) / total rank sum.
    const { positiveRankSum, negativeRankSum } = result;
    const total = positiveRankSum + negativeRankSum;
    expect(result.rankBiserial).toBeCloseTo((positiveRankSum - negativeRankSum) / total, 14);
    const mirrored = estimated(expected.differences.map((difference) => -difference));
    expect(mirrored.pValue).toBe(result.pValue);
    expect(mirrored.rankBiserial).toBeCloseTo(-result.rankBiserial, 14);
    expectRelative(mirrored.hodgesLehmann, -result.hodgesLehmann, 1e-14);
    expect(estimated(expected.differences.toReversed())).toEqual(result);
  });
});

test('published: depression scores, V = 40 and two-sided p twice the printed 0.01953', () => {
  const result = estimated(reference.signedRank[0]!.differences);
  expect(result.positiveRankSum).toBe(40);
  expect((result.pValue / 2).toFixed(5)).toBe('0.01953');
});

test('zeros are dropped from the test, said so, and kept in the estimate', () => {
  const result = estimated([0, 0, 0, 1, 2]);
  expect(result).toMatchObject({ pairs: 5, zeroDifferences: 3, pairsUsed: 2 });
  // By hand: with both ranks positive, P = 2·(1/4); the median of the 15 Walsh averages is 0.5.
  expect(result.pValue).toBe(0.5);
  expect(result.hodgesLehmann).toBe(0.5);
});

test('too few pairs for a level: no interval', () => {
  // By hand: with 5 pairs the widest interval leaves out 2/32 = 6.25 %.
  expect(estimated([1, 2, 3, 4, 5]).interval).toMatchObject({
    estimable: false,
    reason: 'attainable-confidence-too-low',
  });
  expect(estimated([1, 2, 3, 4, 5], 0.9).interval).toMatchObject({
    estimable: true,
    lower: 1,
    upper: 5,
    achievedLevel: 1 - 2 / 32,
  });
});

test('beyond a hundred pairs the approximation is near the exact distribution', () => {
  // reference: R 4.2.2 psignrank and qsignrank, tests/reference/ranks.R. Loose, as the normal
  // distribution is: p to 2 %, the interval's ends to two Walsh averages.
  const expected = reference.signedRank.find((entry) => entry.lowerAround !== undefined)!;
  const result = estimated(expected.differences);
  expect(result.method).toBe('normal-approximation');
  expectRelative(result.pValue, expected.exactPValue!, 0.02);
  if (!result.interval.estimable) throw new Error('should be estimable');
  const { lower, upper, achievedLevel } = result.interval;
  expect(lower >= expected.lowerAround![0]! && lower <= expected.lowerAround![4]!).toBe(true);
  expect(upper >= expected.upperAround![0]! && upper <= expected.upperAround![4]!).toBe(true);
  expect(achievedLevel >= 0.95 && achievedLevel < 0.951).toBe(true);
});

test('the k-th Walsh average is that of the sorted list', () => {
  const value = fc.oneof(
    fc.integer({ min: -5, max: 5 }),
    fc.double({ noNaN: true, min: -9, max: 9 }),
  );
  fc.assert(
    fc.property(fc.array(value, { minLength: 1, maxLength: 12 }), fc.nat(), (values, pick) => {
      const sorted = Float64Array.from(values).sort();
      const all: number[] = [];
      for (let i = 0; i < sorted.length; i += 1) {
        for (let j = i; j < sorted.length; j += 1) all.push((sorted[i]! + sorted[j]!) / 2);
      }
      all.sort((left, right) => left - right);
      const k = (pick % all.length) + 1;
      expect(walshAverage(sorted, k) - all[k - 1]!).toBe(0);
    }),
  );
});

describe('what cannot be estimated says so', () => {
  test('nothing, or only zeros', () => {
    expect(signedRankTest([])).toMatchObject({ reason: 'too-few-participants' });
    expect(signedRankTest([0, 0, -0])).toMatchObject({ reason: 'all-differences-zero' });
  });

  test('bad input is refused', () => {
    expect(() => signedRankTest([1, Number.NaN])).toThrow(DomainError);
    expect(() => signedRankTest([1, Number.NEGATIVE_INFINITY])).toThrow(DomainError);
    expect(() => signedRankTest([1, 2], { confidenceLevel: 1 })).toThrow(DomainError);
  });

  test('no number is ever NaN or infinite', () => {
    const value = fc.oneof(
      fc.integer({ min: -2, max: 2 }),
      fc.double({ noNaN: true, min: -1e99, max: 1e99 }),
    );
    fc.assert(
      fc.property(fc.array(value, { maxLength: 130 }), (differences) => {
        expect(nonFinitePaths(signedRankTest(differences))).toEqual([]);
      }),
    );
  });
});
