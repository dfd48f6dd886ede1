import type { Matrix } from '../numerics/matrix.ts';

/**
 * Orthonormal contrasts among `levels` levels: levels × (levels − 1), every column of length one,
 * orthogonal to the others and to the constant (normalised Helmert contrasts).
 */
export function orthonormalContrasts(levels: number): Matrix {
  const columns = Math.max(0, levels - 1);
  const values = new Float64Array(levels * columns);
  for (let column = 0; column < columns; column += 1) {
    const before = column + 1;
    const scale = 1 / Math.sqrt(before * (before + 1));
    for (let row = 0; row < before; row += 1) values[row * columns + column] = scale;
    values[before * columns + column] = -before * scale;
  }
  return { rows: levels, columns, values };
}

/** One column of constants of length one: the mean over `levels` levels, times √levels. */
export function normalisedConstant(levels: number): Matrix {
  const values = new Float64Array(levels).fill(1 / Math.sqrt(levels));
  return { rows: levels, columns: 1, values };
}

/** The Kronecker product: the right factor varies fastest in rows and in columns. */
export function kronecker(left: Matrix, right: Matrix): Matrix {
  const rows = left.rows * right.rows;
  const columns = left.columns * right.columns;
  const values = new Float64Array(rows * columns);
  for (let row = 0; row < rows; row += 1) {
    for (let column = 0; column < columns; column += 1) {
      const leftIndex =
        Math.floor(row / right.rows) * left.columns + Math.floor(column / right.columns);
      const rightIndex = (row % right.rows) * right.columns + (column % right.columns);
      values[row * columns + column] = left.values[leftIndex]! * right.values[rightIndex]!;
    }
  }
  return { rows, columns, values };
}

/**
 * Sum-to-zero coding of one level among `levels`: the unit vector, or −1 everywhere for the last.
 * Its coefficients are deviations from the unweighted mean of all levels.
 */
export function sumToZeroCode(level: number, levels: number): Float64Array {
  const code = new Float64Array(Math.max(0, levels - 1));
  if (level < levels - 1) code[level] = 1;
  else code.fill(-1);
  return code;
}

/** All subsets of 0 … size − 1, by size and then in order: the effects of a factorial. */
export function subsetsInOrder(size: number): number[][] {
  const subsets = Array.from({ length: 2 ** size }, (_, bits) =>
    Array.from({ length: size }, (_, index) => index).filter((index) => (bits >> index) & 1),
  );
  return subsets.sort((left, right) => {
    if (left.length !== right.length) return left.length - right.length;
    const at = left.findIndex((index, position) => index !== right[position]);
    return at < 0 ? 0 : left[at]! - right[at]!;
  });
}
