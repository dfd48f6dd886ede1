import { isWholeFrom, type ProtocolFault } from './fault.ts';
import type { PolicyChoice } from './protocol.ts';

/** With more, a cell of ordinary size is a part of one block, and nothing is promised for it. */
export const BLOCK_MULTIPLE_MAX = 10;

/**
 * Faults of the rule by which sequences are handed out.
 *
 * - Permuted blocks need multiples: whole numbers from 1 to BLOCK_MULTIPLE_MAX, none twice, since
 *   each is drawn as often as every other. A single one gives blocks of one size.
 *
 * @returns faults with pointers from the protocol's root
 */
export function policyFaults(policy: PolicyChoice): ProtocolFault[] {
  switch (policy.kind) {
    case 'balanced':
      return [];
    case 'permuted-blocks':
      return multipleFaults(policy.multiples);
  }
}

function multipleFaults(multiples: readonly number[]): ProtocolFault[] {
  const pointer = '/policy/multiples';
  if (multiples.length === 0) {
    const message = 'Permuted blocks need a multiple, such as 1 for blocks of each sequence once';
    return [{ pointer, code: 'no-block-multiples', message }];
  }
  const faults: ProtocolFault[] = [];
  for (const [index, multiple] of multiples.entries()) {
    if (!isWholeFrom(1, multiple) || multiple > BLOCK_MULTIPLE_MAX) {
      faults.push({
        pointer: `${pointer}/${index}`,
        code: 'unusable-block-multiple',
        message: `A block multiple must be a whole number from 1 to ${BLOCK_MULTIPLE_MAX}`,
      });
    }
    if (multiples.indexOf(multiple) < index) {
      const message = `The block multiple ${multiple} stands more than once`;
      faults.push({ pointer: `${pointer}/${index}`, code: 'duplicate-block-multiple', message });
    }
  }
  return faults;
}
