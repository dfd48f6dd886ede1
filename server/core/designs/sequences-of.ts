import { DomainError } from '../errors.ts';
import { schemeFaults } from '../protocol/check-scheme.ts';
import { conditionBlocks } from '../protocol/condition-blocks.ts';
import type { BaseScheme, SchemeChoice } from '../protocol/protocol.ts';
import { completePermutations } from './complete-permutations.ts';
import { constrainedPermutations } from './constrained-permutations.ts';
import { customList } from './custom-list.ts';
import { cyclicLatinSquare } from './cyclic-latin-square.ts';
import { withExtraPeriod } from './extra-period.ts';
import { incompleteBlocks } from './incomplete-blocks.ts';
import { mirrored } from './mirrored.ts';
import { nested } from './nested.ts';
import { orthogonalLatinSquares } from './orthogonal-latin-squares.ts';
import { permutationFraction } from './permutation-fraction.ts';
import { randomPermutations } from './random-permutations.ts';
import { twoConditionSequences } from './two-conditions.ts';
import { williamsSquare } from './williams.ts';

/**
 * The sequences of a scheme, in a fixed order: a sequence's index in this array is its identity for
 * as long as the protocol version lives, so the order must never change for a given scheme.
 *
 * @param conditionKeys the conditions in protocol order; an index is the place in this array
 * @param periods       number of periods, p
 * @returns rows of p condition indices from 0
 * @throws {DomainError} naming the first fault of `schemeFaults`, when the scheme cannot be built
 */
export function sequencesOf(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
  periods: number,
): number[][] {
  const [fault] = schemeFaults(scheme, conditionKeys, periods);
  if (fault !== undefined) throw new DomainError(`${fault.message} (${fault.pointer})`);
  const conditionCount = conditionKeys.length;
  switch (scheme.kind) {
    case 'mirrored':
      return mirrored(baseSequences(scheme.base, conditionCount));
    case 'extra-period':
      return withExtraPeriod(baseSequences(scheme.base, conditionCount));
    case 'two-conditions':
      return twoConditionSequences(scheme.design);
    case 'balanced-incomplete-blocks':
      return incompleteBlocks(conditionCount, periods, scheme.carryoverBalanced);
    case 'permutation-fraction':
      return permutationFraction(conditionCount, scheme.squares);
    case 'random-permutations':
      return randomPermutations(scheme, conditionCount);
    case 'constrained-permutations':
      return constrainedPermutations(scheme.constraints, conditionKeys);
    case 'nested': {
      const groups = conditionBlocks(conditionKeys, scheme.blockedFactor);
      return nested(
        groups,
        baseSequences(scheme.blocks, groups.length),
        baseSequences(scheme.insideBlocks, groups[0]?.length ?? 0),
      );
    }
    case 'custom-list':
      return customList(scheme.sequences, conditionKeys);
    default:
      return baseSequences(scheme.kind, conditionCount);
  }
}

function baseSequences(base: BaseScheme, conditionCount: number): number[][] {
  switch (base) {
    case 'complete-permutations':
      return completePermutations(conditionCount);
    case 'cyclic-latin-square':
      return cyclicLatinSquare(conditionCount);
    case 'williams':
      return williamsSquare(conditionCount);
    case 'orthogonal-latin-squares':
      return orthogonalLatinSquares(conditionCount);
  }
}
