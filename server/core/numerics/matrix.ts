import { DomainError } from '../errors.ts';

/**
 * A dense matrix: rows × columns, row-major, `values.length === rows · columns`. As a table of
 * measurements, rows are participants and columns conditions, and NaN stands for a missing value.
 */
export interface Matrix {
  readonly rows: number;
  readonly columns: number;
  readonly values: Float64Array;
}

/**
 * Builds a {@link Matrix} from rows of equal length.
 *
 * @throws {DomainError} when the rows differ in length
 */
export function matrixFromRows(rows: readonly ArrayLike<number>[]): Matrix {
  const columns = rows[0]?.length ?? 0;
  const values = new Float64Array(rows.length * columns);
  rows.forEach((row, index) => {
    if (row.length !== columns) {
      throw new DomainError(`Row ${index} has ${row.length} values, the first has ${columns}.`);
    }
    values.set(row, index * columns);
  });
  return { rows: rows.length, columns, values };
}

/** Column `index` of a matrix, copied. */
export function columnOf(matrix: Matrix, index: number): Float64Array {
  return Float64Array.from(
    { length: matrix.rows },
    (_, row) => matrix.values[row * matrix.columns + index]!,
  );
}

/** The product left · right, (n × m)·(m × p). */
export function multiply(left: Matrix, right: Matrix): Matrix {
  if (left.columns !== right.rows) {
    throw new DomainError(`Cannot multiply ${left.columns} columns by ${right.rows} rows.`);
  }
  const values = new Float64Array(left.rows * right.columns);
  for (let row = 0; row < left.rows; row += 1) {
    for (let inner = 0; inner < left.columns; inner += 1) {
      const factor = left.values[row * left.columns + inner]!;
      for (let column = 0; column < right.columns; column += 1) {
        values[row * right.columns + column]! +=
          factor * right.values[inner * right.columns + column]!;
      }
    }
  }
  return { rows: left.rows, columns: right.columns, values };
}
