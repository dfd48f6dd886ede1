import type { ProtocolFault } from './fault.ts';
import { SEQUENCES_MAX } from './protocol.ts';

/**
 * Faults of a custom list of sequences: none or too many of them, one whose length is not the
 * number of periods, unknown conditions, and conditions that no sequence presents.
 */
export function customListFaults(
  sequences: readonly (readonly string[])[],
  conditionKeys: readonly string[],
  periods: number,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const pointer = '/scheme/sequences';
  if (sequences.length === 0) {
    faults.push({ pointer, code: 'no-sequences', message: 'A custom list needs a sequence' });
  }
  if (sequences.length > SEQUENCES_MAX) {
    const message = `A custom list holds at most ${SEQUENCES_MAX} sequences`;
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
