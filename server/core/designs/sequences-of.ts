import { DomainError } from '../errors.ts';
import { schemeFaults } from '../protocol/check-scheme.ts';
import type { SchemeChoice } from '../protocol/protocol.ts';
import { completePermutations } from './complete-permutations.ts';
import { customList } from './custom-list.ts';
import { cyclicLatinSquare } from './cyclic-latin-square.ts';
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
  switch (scheme.kind) {
    case 'complete-permutations':
      return completePermutations(conditionKeys.length);
    case 'cyclic-latin-square':
      return cyclicLatinSquare(conditionKeys.length);
    case 'williams':
      return williamsSquare(conditionKeys.length);
    case 'custom-list':
      return customList(scheme.sequences, conditionKeys);
  }
}
