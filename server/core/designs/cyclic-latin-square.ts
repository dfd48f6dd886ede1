import { DomainError } from '../errors.ts';

/**
 * The cyclic Latin square: row r begins with condition r and goes on in order, beginning again
 * after the last. Every condition stands once in each period, but precedence is as unbalanced as
 * can be: each condition is always preceded by the same one.
 * Source: Fisher & Yates, Statistical Tables, Latin squares; Cochran & Cox 1957, chapter 4.
 *
 * @param conditionCount n ≥ 2
 * @returns n rows of n condition indices from 0
 * @throws {DomainError} when conditionCount is not a whole number of at least 2
 */
export function cyclicLatinSquare(conditionCount: number): number[][] {
  const firstRow = Array.from({ length: conditionCount }, (_, periodIndex) => periodIndex);
  return developedCyclically(firstRow);
}

/**
 * Develops a first row into a Latin square by adding 1, modulo n, to every entry of the row before.
 *
 * @param firstRow a permutation of 0..n−1, n ≥ 2
 * @returns n rows; row r is the first row plus r modulo n
 * @throws {DomainError} when the row has fewer than two entries
 */
export function developedCyclically(firstRow: readonly number[]): number[][] {
  const size = firstRow.length;
  if (size < 2) throw new DomainError(`A square needs at least two conditions, not ${size}`);
  return Array.from({ length: size }, (_, row) => firstRow.map((entry) => (entry + row) % size));
}
