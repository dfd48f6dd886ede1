import { assert } from '../errors.ts';
import { williamsSquare } from './williams.ts';

/**
 * A balanced fraction of the complete permutations: Williams' square with its conditions renamed in
 * several ways, so that there are more different orders than one square has, and each as many
 * sequences as whole squares is uniform on periods and balanced for carryover.
 *
 * Renaming by π turns the square, the rows w + c for c = 0..n−1, into the rows π(w + c). Two such
 * squares have a row in common only when they are the same: they are left cosets of the
 * translations (n even), or of the translations and reflections (n odd, where the square comes with
 * its reverse). So the (n − 1)! squares, or (n − 1)!/2 pairs, share out the n! permutations. Each
 * coset has one π with π(0) = 0 (n odd: and π(1) < π(n − 1)); they are taken in lexicographic
 * order, the first of them being Williams' square itself.
 * Source: cosets of a subgroup, any algebra text; the fraction itself is common practice.
 *
 * @param conditionCount n ≥ 3
 * @param squares        1 to (n − 1)! for even n, to (n − 1)!/2 pairs for odd n
 * @returns `squares` times n rows (n even) or 2n rows (n odd)
 */
export function permutationFraction(conditionCount: number, squares: number): number[][] {
  const square = williamsSquare(conditionCount);
  let renaming = Array.from({ length: conditionCount }, (_, condition) => condition);
  const rows: number[][] = [];
  for (let taken = 0; taken < squares; ) {
    const isTaken = conditionCount % 2 === 0 || renaming[1]! < renaming.at(-1)!;
    if (isTaken) {
      taken += 1;
      rows.push(...square.map((row) => row.map((condition) => renaming[condition]!)));
    }
    if (taken < squares) renaming = nextPermutation(renaming);
  }
  assert(renaming[0] === 0, 'there are as many squares as were asked for');
  return rows;
}

/** The next in lexicographic order. Source: Knuth, The Art of Computer Programming, 7.2.1.2, L. */
function nextPermutation(order: readonly number[]): number[] {
  const next = [...order];
  let pivot = next.length - 2;
  while (pivot >= 0 && next[pivot]! > next[pivot + 1]!) pivot -= 1;
  assert(pivot >= 0, 'there is a next permutation');
  let larger = next.length - 1;
  while (next[larger]! < next[pivot]!) larger -= 1;
  const moved = next[pivot]!;
  next[pivot] = next[larger]!;
  next[larger] = moved;
  return [...next.slice(0, pivot + 1), ...next.slice(pivot + 1).reverse()];
}
