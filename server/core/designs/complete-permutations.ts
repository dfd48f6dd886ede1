import { DomainError } from '../errors.ts';
import { COMPLETE_PERMUTATION_CONDITIONS_MAX } from '../protocol/check-scheme.ts';

/**
 * Every order of the conditions, each once, in lexicographic order. With n! sequences, condition by
 * period, ordered pairs and every higher order of precedence are balanced.
 * Source: lexicographic generation, Knuth, The Art of Computer Programming, 7.2.1.2.
 *
 * @param conditionCount 2 to 7
 * @returns n! rows of n condition indices from 0
 * @throws {DomainError} outside 2 to 7
 */
export function completePermutations(conditionCount: number): number[][] {
  const max = COMPLETE_PERMUTATION_CONDITIONS_MAX;
  if (!Number.isInteger(conditionCount) || conditionCount < 2 || conditionCount > max) {
    throw new DomainError(`Complete permutations need 2 to ${max} conditions: ${conditionCount}`);
  }
  const rows: number[][] = [];
  const extend = (row: readonly number[]): void => {
    if (row.length === conditionCount) {
      rows.push([...row]);
      return;
    }
    for (let condition = 0; condition < conditionCount; condition += 1) {
      if (!row.includes(condition)) extend([...row, condition]);
    }
  };
  extend([]);
  return rows;
}
