import { type NotEstimable, notEstimable } from '../estimability.ts';
import type { Matrix } from '../numerics/matrix.ts';

/**
 * Why a table cannot be compared within participants, or null when it can.
 *
 * @param table participants × conditions; NaN marks a missing value
 */
export function completeTableFault(table: Matrix): NotEstimable | null {
  const { rows: participants, columns: conditions, values } = table;
  if (conditions < 2) {
    return notEstimable(
      'too-few-conditions',
      `Two conditions are needed; there are ${conditions}.`,
    );
  }
  if (participants < 2) {
    return notEstimable(
      'too-few-participants',
      `Two participants are needed; there are ${participants}.`,
    );
  }
  if (values.some(Number.isNaN)) {
    return notEstimable('incomplete-data', 'Every participant needs a value in every condition.');
  }
  return null;
}
