import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { cholesky, logDeterminantFromCholesky } from '#core/numerics/cholesky.ts';
import {
  applyQTranspose,
  householderQr,
  linearCombination,
  solveFromQTranspose,
} from '#core/numerics/householder-qr.ts';
import { columnOf, matrixFromRows, multiply } from '#core/numerics/matrix.ts';
import reference from '../../reference/linear-algebra.json' with { type: 'json' };
import { expectRelative } from '../../support/relative.ts';

describe('least squares by Householder reflections', () => {
  // reference: mpmath, 50 digits, tests/reference/linear-algebra.py.
  const { leastSquares } = reference;
  const qr = householderQr(matrixFromRows(leastSquares.x));

  test('coefficients, residual sum of squares and variance of a combination', () => {
    const qty = applyQTranspose(qr, Float64Array.from(leastSquares.y));
    solveFromQTranspose(qr, qty).forEach((value, index) => {
      expectRelative(value, Number(leastSquares.coefficients[index]), 1e-12);
    });
    const residual = qty.subarray(qr.rank).reduce((sum, value) => sum + value * value, 0);
    expectRelative(residual, Number(leastSquares.residualSumOfSquares), 1e-13);
    const combination = linearCombination(qr, Float64Array.from(leastSquares.weights));
    expect(combination.determined).toBe(true);
    expectRelative(combination.varianceFactor, Number(leastSquares.varianceFactor), 1e-12);
  });

  test('a dependent column is dropped and named, in its own group', () => {
    // The third column is the sum of the first two; the fourth is free.
    const rows = [
      [1, 0, 1, 2],
      [0, 1, 1, 0],
      [2, 1, 3, 1],
      [1, 3, 4, -1],
      [5, 2, 7, 3],
    ];
    const whole = householderQr(matrixFromRows(rows));
    expect(whole.rank).toBe(3);
    expect(whole.dropped.length).toBe(1);
    const grouped = householderQr(matrixFromRows(rows), [2, 2]);
    expect(grouped.groupRanks).toEqual([2, 1]);
    expect(grouped.dropped).toEqual([2]);
    // β₁ + β₃ and β₂ + β₃ are determined by the data, β₁ alone is not.
    expect(linearCombination(grouped, Float64Array.of(1, 0, 1, 0)).determined).toBe(true);
    expect(linearCombination(grouped, Float64Array.of(1, 0, 0, 0)).determined).toBe(false);
  });

  test('normal equations hold whatever the matrix', () => {
    const entry = fc.integer({ min: -20, max: 20 });
    const row = fc.tuple(entry, entry, entry, entry);
    fc.assert(
      fc.property(fc.array(row, { minLength: 6, maxLength: 12 }), (rows) => {
        const x = matrixFromRows(rows.map(([a, b, c]) => [a, b, c]));
        const y = Float64Array.from(rows.map((values) => values[3]));
        const factor = householderQr(x);
        const coefficients = solveFromQTranspose(factor, applyQTranspose(factor, y));
        const fitted = multiply(x, { rows: 3, columns: 1, values: coefficients });
        for (let column = 0; column < 3; column += 1) {
          const own = columnOf(x, column);
          const product = own.reduce((sum, v, i) => sum + v * (y[i]! - fitted.values[i]!), 0);
          expect(Math.abs(product)).toBeLessThan(1e-6);
        }
      }),
    );
  });

  test('bad input is refused', () => {
    expect(() => householderQr(matrixFromRows([[1, Number.NaN]]))).toThrow(DomainError);
    expect(() => householderQr(matrixFromRows([[1, 2]]), [1])).toThrow(DomainError);
    expect(() => matrixFromRows([[1, 2], [1]])).toThrow(DomainError);
  });
});

describe('Cholesky', () => {
  test('log determinant', () => {
    // reference: mpmath, 50 digits, tests/reference/linear-algebra.py.
    const factor = cholesky(matrixFromRows(reference.determinant.matrix));
    expect(factor).not.toBeNull();
    const logDeterminant = logDeterminantFromCholesky(factor!);
    expectRelative(logDeterminant, Number(reference.determinant.logDeterminant), 1e-13);
  });

  test('a singular or indefinite matrix has no factor', () => {
    expect(
      cholesky(
        matrixFromRows([
          [1, 2],
          [2, 4],
        ]),
      ),
    ).toBeNull();
    expect(
      cholesky(
        matrixFromRows([
          [1, 2],
          [2, 1],
        ]),
      ),
    ).toBeNull();
    expect(() => cholesky(matrixFromRows([[1, 2]]))).toThrow(DomainError);
  });
});
