import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { matrixFromRows } from '#core/numerics/matrix.ts';
import { friedmanTest } from '#core/ranks/friedman.ts';
import { midRanks } from '#core/ranks/mid-ranks.ts';
import reference from '../../reference/ranks.json' with { type: 'json' };
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { expectRelative } from '../../support/relative.ts';

function estimated(rows: readonly (readonly number[])[]) {
  const result = friedmanTest(matrixFromRows(rows));
  if (!result.estimable) throw new Error(result.detail);
  return result;
}

// published: rounding first base, Hollander & Wolfe 1973, p. 140 ff., the worked example of R's
// ?friedman.test (χ² = 11.143, p = 0.003805). dataset: ergoStool (R package nlme).
// reference: R 4.2.2 friedman.test, tests/reference/ranks.R.
describe.each(reference.friedman)('$name', (reference) => {
  const { table } = reference;

  test('chi-square, degrees of freedom, p and rank sums', () => {
    const result = estimated(table);
    expectRelative(result.chiSquare, reference.chiSquare, 1e-12);
    expect(result.degreesOfFreedom).toBe(reference.degreesOfFreedom);
    expectRelative(result.pValue, reference.pValue, 1e-11);
    expect(result.rankSums).toEqual(reference.rankSums);
    const participants = table.length;
    expect(result.meanRanks).toEqual(reference.rankSums.map((sum) => sum / participants));
  });

  test("Kendall's W and the F of Iman and Davenport, from their formulas", () => {
    // published: W = χ²/(n(k − 1)); F = (n − 1)χ²/(n(k − 1) − χ²) (Iman & Davenport 1980).
    const result = estimated(table);
    const n = table.length;
    const k = table[0]!.length;
    const { chiSquare } = reference;
    expectRelative(result.kendallsW, chiSquare / (n * (k - 1)), 1e-12);
    if (!result.imanDavenport.estimable) throw new Error('should be estimable');
    const { fStatistic, degreesOfFreedom, errorDegreesOfFreedom } = result.imanDavenport;
    expectRelative(fStatistic, ((n - 1) * chiSquare) / (n * (k - 1) - chiSquare), 1e-11);
    expect([degreesOfFreedom, errorDegreesOfFreedom]).toEqual([k - 1, (k - 1) * (n - 1)]);
  });

  test('permuting participants, shifting and stretching each changes nothing at all', () => {
    const changed = table.map((row, index) => row.map((value) => Math.exp(value) * 2 ** index));
    expect(estimated(changed.toReversed())).toEqual(estimated(table));
  });
});

test('published: rounding first base to the digits printed', () => {
  const result = estimated(reference.friedman[0]!.table);
  expect(result.chiSquare.toFixed(3)).toBe('11.143');
  expect(result.pValue.toFixed(6)).toBe('0.003805');
});

test('mid-ranks share ties', () => {
  // Worked by hand from the definition.
  expect(midRanks([3, 1, 3, 2, 3])).toEqual({
    ranks: Float64Array.of(4, 1, 4, 2, 4),
    tieSizes: [1, 1, 3],
  });
});

describe('what cannot be estimated says so', () => {
  test.each([
    ['too-few-conditions', [[1], [2]]],
    ['too-few-participants', [[1, 2, 3]]],
    [
      'incomplete-data',
      [
        [1, 2],
        [Number.NaN, 3],
      ],
    ],
    [
      'all-values-tied',
      [
        [1, 1, 1],
        [2, 2, 2],
      ],
    ],
  ] as [string, number[][]][])('%s', (reason, rows) => {
    expect(friedmanTest(matrixFromRows(rows))).toMatchObject({ estimable: false, reason });
  });

  test('complete agreement: chi-square, but no F', () => {
    const result = estimated([
      [1, 2, 3],
      [4, 5, 6],
      [0, 5, 9],
    ]);
    expect(result.kendallsW).toBe(1);
    expect(result.chiSquare).toBe(6);
    expect(result.imanDavenport).toMatchObject({ estimable: false, reason: 'zero-error-variance' });
  });

  test('an infinite value is refused', () => {
    const rows = [
      [1, Number.POSITIVE_INFINITY],
      [1, 2],
    ];
    expect(() => friedmanTest(matrixFromRows(rows))).toThrow(DomainError);
  });

  test('no number is ever NaN or infinite', () => {
    const row = fc.array(fc.integer({ min: 0, max: 2 }), { minLength: 3, maxLength: 3 });
    fc.assert(
      fc.property(fc.array(row, { minLength: 1, maxLength: 6 }), (rows) => {
        expect(nonFinitePaths(friedmanTest(matrixFromRows(rows)))).toEqual([]);
      }),
    );
  });
});
