import { primePower } from '../numerics/finite-field.ts';
import type { ProtocolFault } from './fault.ts';

/** Up to this many conditions there is an incomplete scheme for every smaller number of periods. */
export const TABULATED_CONDITIONS_MAX = 13;

/**
 * Larger Youden squares: numbers of periods by number of conditions, besides one period fewer than
 * conditions, which there is for all.
 * Source of existence: Cochran & Cox, Experimental Designs, §13.2 and plan 13.1a ff.; Hall,
 * Combinatorial Theory, table of cyclic difference sets.
 */
export const YOUDEN_PERIODS: ReadonlyMap<number, readonly number[]> = new Map([
  [15, [7, 8]],
  [16, [6, 10]],
  [19, [9, 10]],
  [21, [5, 16]],
  [23, [11, 12]],
  [31, [6, 15, 16, 25]],
  [37, [9]],
]);

/**
 * Faults of a scheme of balanced incomplete blocks: as many periods as conditions or more, or a
 * size for which none is known here; the message names sizes that there are.
 *
 * @param carryoverBalanced whether immediate succession is to be balanced too
 */
export function incompleteFaults(
  carryoverBalanced: boolean,
  conditionCount: number,
  periods: number,
): ProtocolFault[] {
  const pointer = '/scheme';
  if (conditionCount < 3) {
    const message = 'An incomplete scheme needs three conditions';
    return [{ pointer, code: 'too-few-conditions-for-scheme', message }];
  }
  if (periods < 2 || periods >= conditionCount) {
    const message =
      `Incomplete blocks of ${conditionCount} conditions have 2 to ${conditionCount - 1} ` +
      `periods, but the protocol has ${periods}; ` +
      'a Williams design presents every condition in as many periods as there are conditions';
    return [{ pointer, code: 'scheme-needs-other-periods', message }];
  }
  if (conditionCount <= TABULATED_CONDITIONS_MAX) return [];
  const isPrimePower = primePower(conditionCount) !== null;
  if (carryoverBalanced) {
    if (isPrimePower) return [];
    const message =
      'Incomplete blocks balanced for carryover are known here for up to ' +
      `${TABULATED_CONDITIONS_MAX} conditions and for prime powers; ${conditionCount} is none`;
    return [{ pointer, code: 'no-such-design', message }];
  }
  const known = [...(YOUDEN_PERIODS.get(conditionCount) ?? []), conditionCount - 1];
  if (known.includes(periods)) return [];
  const message =
    `With ${conditionCount} conditions incomplete blocks are known here for ` +
    `${known.join(', ')} periods, not for ${periods}` +
    (isPrimePower ? '; balanced for carryover there are some for any number of periods' : '');
  return [{ pointer, code: 'no-such-design', message }];
}
