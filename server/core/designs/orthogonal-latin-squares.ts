import { finiteField } from '../numerics/finite-field.ts';

/**
 * The complete set of n − 1 mutually orthogonal Latin squares for a prime power n of conditions:
 * square a has in row i and period j the condition i + a·j, in the finite field of order n. Pairs
 * at every lag are balanced: over all rows and squares, a pair that stands in two given periods is
 * every ordered pair of different conditions once.
 * Source: Bose 1938, Sankhyā 3:323–338; for carryover at every lag, Patterson 1952, Biometrika
 * 39:32–48.
 *
 * @param conditionCount n, a prime power from 2
 * @returns n(n − 1) rows of n condition indices from 0, square after square
 * @throws {DomainError} when n is not a prime power
 */
export function orthogonalLatinSquares(conditionCount: number): number[][] {
  const field = finiteField(conditionCount);
  const elements = Array.from({ length: conditionCount }, (_, element) => element);
  return elements
    .slice(1)
    .flatMap((a) => elements.map((i) => elements.map((j) => field.add(i, field.multiply(a, j)))));
}
