import { keyFaults, type ProtocolFault } from './fault.ts';
import { conditionsOf, type Factor, type Protocol } from './protocol.ts';

/** More conditions than any participant could meet; keeps tables of ordered pairs small. */
export const CONDITIONS_MAX = 64;

/** More strata than balance could be kept in. */
export const STRATA_MAX = 256;

/** Faults of the within and between factors: keys, numbers of levels, conditions and strata. */
export function factorFaults(
  protocol: Pick<Protocol, 'withinFactors' | 'betweenFactors'>,
): ProtocolFault[] {
  const { withinFactors, betweenFactors } = protocol;
  const faults: ProtocolFault[] = [
    ...withinFactorFaults(withinFactors),
    ...keyFaults(betweenFactors, '/betweenFactors', 'factor'),
    ...levelFaults(betweenFactors, '/betweenFactors'),
  ];
  const withinKeys = new Set(withinFactors.map(({ key }) => key));
  for (const [index, { key }] of betweenFactors.entries()) {
    if (!withinKeys.has(key)) continue;
    const message = `The factor "${key}" cannot be both within and between participants`;
    faults.push({ pointer: `/betweenFactors/${index}/key`, code: 'duplicate-key', message });
  }
  const strataCount = cellCount(betweenFactors);
  if (strataCount > STRATA_MAX) {
    const message = `There are ${strataCount} strata, more than ${STRATA_MAX}`;
    faults.push({ pointer: '/betweenFactors', code: 'too-many-strata', message });
  }
  return faults;
}

/** Faults of the within factors alone: keys, levels and the number of conditions. */
export function withinFactorFaults(withinFactors: readonly Factor[]): ProtocolFault[] {
  const faults: ProtocolFault[] = [
    ...keyFaults(withinFactors, '/withinFactors', 'factor'),
    ...levelFaults(withinFactors, '/withinFactors'),
  ];
  const conditionCount = withinFactors.length === 0 ? 0 : cellCount(withinFactors);
  if (conditionCount < 2) {
    const message = `There must be at least two conditions, not ${conditionCount}`;
    faults.push({ pointer: '/withinFactors', code: 'fewer-than-two-conditions', message });
  }
  if (conditionCount > CONDITIONS_MAX) {
    const message = `There are ${conditionCount} conditions, more than ${CONDITIONS_MAX}`;
    faults.push({ pointer: '/withinFactors', code: 'too-many-conditions', message });
  }
  return faults;
}

/** The conditions' keys without repetition, or null when there are more than CONDITIONS_MAX. */
export function conditionKeysOf(withinFactors: readonly Factor[]): string[] | null {
  if (withinFactors.length === 0) return [];
  if (cellCount(withinFactors) > CONDITIONS_MAX) return null;
  return [...new Set(conditionsOf(withinFactors).map(({ key }) => key))];
}

function levelFaults(factors: readonly Factor[], pointer: string): ProtocolFault[] {
  return factors.flatMap(({ key, levels }, index) => {
    const place = `${pointer}/${index}/levels`;
    const faults = keyFaults(levels, place, 'level');
    if (levels.length < 2) {
      const message = `The factor "${key}" needs at least two levels, not ${levels.length}`;
      faults.push({ pointer: place, code: 'fewer-than-two-levels', message });
    }
    return faults;
  });
}

function cellCount(factors: readonly Factor[]): number {
  return factors.reduce((product, { levels }) => product * levels.length, 1);
}
