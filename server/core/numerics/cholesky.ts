import { DomainError } from '../errors.ts';
import type { Matrix } from './matrix.ts';

/** A pivot below this fraction of its diagonal element is rounding: the matrix is singular. */
const PIVOT_TOLERANCE = 1e-12;

/**
 * The Cholesky factor L of a symmetric positive definite matrix, A = L·Lᵀ; null when a pivot is
 * not positive beyond rounding, so that A is singular or indefinite.
 *
 * Source: Golub & Van Loan, Matrix Computations, 4th ed., §4.2.
 *
 * @param matrix n × n; only the lower triangle is read
 * @throws {DomainError} when the matrix is not square
 */
export function cholesky(matrix: Matrix): Matrix | null {
  const size = matrix.rows;
  if (matrix.columns !== size) {
    throw new DomainError(
      `A Cholesky factor needs a square matrix, got ${size} × ${matrix.columns}.`,
    );
  }
  const values = new Float64Array(size * size);
  for (let row = 0; row < size; row += 1) {
    for (let column = 0; column <= row; column += 1) {
      let sum = matrix.values[row * size + column]!;
      for (let inner = 0; inner < column; inner += 1) {
        sum -= values[row * size + inner]! * values[column * size + inner]!;
      }
      if (row > column) {
        values[row * size + column] = sum / values[column * size + column]!;
      } else {
        if (!(sum > PIVOT_TOLERANCE * matrix.values[row * size + row]!)) return null;
        values[row * size + row] = Math.sqrt(sum);
      }
    }
  }
  return { rows: size, columns: size, values };
}

/** log |A| from the Cholesky factor of A. */
export function logDeterminantFromCholesky(factor: Matrix): number {
  let sum = 0;
  for (let row = 0; row < factor.rows; row += 1) {
    sum += 2 * Math.log(factor.values[row * factor.columns + row]!);
  }
  return sum;
}
