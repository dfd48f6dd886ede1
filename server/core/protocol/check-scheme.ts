import type { ProtocolFault } from './fault.ts';
import type { SchemeChoice } from './protocol.ts';

/** Complete permutations stop here: 7 conditions have 7! = 5040 sequences, 8 have 40,320. */
export const COMPLETE_PERMUTATION_CONDITIONS_MAX = 7;

/** A custom list holds at most as many sequences as the largest complete set. */
export const CUSTOM_SEQUENCES_MAX = 5040;

/**
 * Everything that keeps a scheme from being built for these conditions and periods.
 *
 * - Complete permutations, cyclic Latin square and Williams need at least two conditions and as
 *   many periods as conditions.
 * - A custom list may have more or fewer periods than conditions. A sequence may stand in it more
 *   than once: every row is handed out as often as every other, so a repeated row is replicated.
 *
 * @param conditionKeys every condition once
 * @param periods       periods.count of the protocol
 * @returns faults with pointers from the protocol's root, none when the scheme can be built
 */
export function schemeFaults(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
  periods: number,
): ProtocolFault[] {
  if (scheme.kind === 'custom-list') {
    return customListFaults(scheme.sequences, conditionKeys, periods);
  }
  const faults: ProtocolFault[] = [];
  const conditionCount = conditionKeys.length;
  const fault = (code: string, message: string): void => {
    faults.push({ pointer: '/scheme', code, message });
  };
  if (conditionCount < 2) fault('scheme-needs-two-conditions', 'A scheme needs two conditions');
  if (periods !== conditionCount) {
    fault(
      'scheme-needs-periods-equal-to-conditions',
      `The scheme ${scheme.kind} needs as many periods as conditions, ` +
        `but there are ${periods} periods and ${conditionCount} conditions`,
    );
  }
  const isComplete = scheme.kind === 'complete-permutations';
  if (isComplete && conditionCount > COMPLETE_PERMUTATION_CONDITIONS_MAX) {
    fault(
      'too-many-conditions-for-scheme',
      `Complete permutations are built for at most ${COMPLETE_PERMUTATION_CONDITIONS_MAX} ` +
        `conditions, but there are ${conditionCount}; a Williams square needs far fewer sequences`,
    );
  }
  return faults;
}

function customListFaults(
  sequences: readonly (readonly string[])[],
  conditionKeys: readonly string[],
  periods: number,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const pointer = '/scheme/sequences';
  if (sequences.length === 0) {
    faults.push({ pointer, code: 'no-sequences', message: 'A custom list needs a sequence' });
  }
  if (sequences.length > CUSTOM_SEQUENCES_MAX) {
    const message = `A custom list holds at most ${CUSTOM_SEQUENCES_MAX} sequences`;
    faults.push({ pointer, code: 'too-many-sequences', message });
  }
  const known = new Set(conditionKeys);
  const presented = new Set<string>();
  for (const [index, sequence] of sequences.entries()) {
    if (sequence.length !== periods) {
      faults.push({
        pointer: `${pointer}/${index}`,
        code: 'sequence-length-not-periods',
        message: `This sequence has ${sequence.length} periods, the protocol has ${periods}`,
      });
    }
    for (const [periodIndex, condition] of sequence.entries()) {
      presented.add(condition);
      if (known.has(condition)) continue;
      faults.push({
        pointer: `${pointer}/${index}/${periodIndex}`,
        code: 'unknown-condition',
        message: `"${condition}" is not a condition; the conditions are ${[...known].join(', ')}`,
      });
    }
  }
  for (const condition of sequences.length === 0 ? [] : conditionKeys) {
    if (presented.has(condition)) continue;
    const message = `No sequence presents the condition "${condition}"`;
    faults.push({ pointer, code: 'condition-never-presented', message });
  }
  return faults;
}

/** Whether every participant meets every condition under the scheme. */
export function meetsEveryCondition(
  scheme: SchemeChoice,
  conditionKeys: readonly string[],
): boolean {
  if (scheme.kind !== 'custom-list') return true;
  return scheme.sequences.every((sequence) => conditionKeys.every((key) => sequence.includes(key)));
}
