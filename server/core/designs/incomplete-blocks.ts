import { DomainError } from '../errors.ts';
import { finiteField, primePower } from '../numerics/finite-field.ts';
import { initialBlocks } from './initial-blocks.ts';
import { orthogonalLatinSquares } from './orthogonal-latin-squares.ts';
import { williamsSquare } from './williams.ts';

/**
 * Balanced incomplete blocks for n conditions and fewer periods: every two conditions meet in
 * equally many sequences, and every condition stands equally often in every period. With as many
 * sequences as conditions this is a Youden square.
 *
 * With balance for carryover, every condition also comes equally often immediately after every
 * other, and equally often in the last period of the sequences that hold another: the conditions of
 * Patterson & Lucas 1962 (Technical Bulletin 147, North Carolina Agricultural Experiment Station),
 * under which all comparisons have the same variance, direct ones and those of carryover, in the
 * model with participants, periods and first-order carryover.
 *
 * Each design is one or several initial blocks, developed over the additive group of the finite
 * field of order n when n is a prime power, of the whole numbers modulo n otherwise (Bose 1939,
 * Annals of Eugenics 9:353–399). Beyond the table, blocks of one period fewer than conditions are a
 * Williams square without its last period, and those balanced for carryover are the first periods
 * of a complete set of orthogonal Latin squares (Patterson 1952, Biometrika 39:32–48).
 *
 * @param conditionCount n ≥ 3
 * @param periods        2 to n − 1
 * @returns rows of `periods` different condition indices, a multiple of n of them
 * @throws {DomainError} for sizes that have a fault of `incompleteFaults`
 */
export function incompleteBlocks(
  conditionCount: number,
  periods: number,
  carryoverBalanced: boolean,
): number[][] {
  const blocks = initialBlocks(conditionCount, periods, carryoverBalanced);
  if (blocks !== null) return developed(blocks, conditionCount);
  if (carryoverBalanced && primePower(conditionCount) !== null) {
    return orthogonalLatinSquares(conditionCount).map((row) => row.slice(0, periods));
  }
  if (!carryoverBalanced && periods === conditionCount - 1) {
    return williamsSquare(conditionCount)
      .slice(0, conditionCount)
      .map((row) => row.slice(0, -1));
  }
  throw new DomainError(
    `No incomplete blocks of ${conditionCount} conditions in ${periods} periods are known here`,
  );
}

/** Each block with every element of the group added to it, block after block. */
function developed(blocks: readonly (readonly number[])[], conditionCount: number): number[][] {
  const isField = primePower(conditionCount) !== null;
  const add = isField
    ? finiteField(conditionCount).add
    : (left: number, right: number) => (left + right) % conditionCount;
  return blocks.flatMap((block) =>
    Array.from({ length: conditionCount }, (_, shift) => block.map((entry) => add(entry, shift))),
  );
}
