import { GENERATOR } from '../numerics/generator.ts';
import { isWholeFrom, type ProtocolFault } from './fault.ts';
import { CONSTRAINED_CONDITIONS_MAX, constraintFaults } from './order-constraints.ts';
import { type OrderConstraint, type RandomPermutations, SEQUENCES_MAX } from './protocol.ts';

/**
 * Faults of a fraction of the permutations, apart from the number of periods: too few conditions,
 * no squares, or more of them than there are.
 */
export function fractionFaults(squares: number, conditionCount: number): ProtocolFault[] {
  if (conditionCount < 3) {
    const message = 'A fraction of the permutations needs three conditions; two have two orders';
    return [{ pointer: '/scheme', code: 'too-few-conditions-for-scheme', message }];
  }
  const most = squaresMax(conditionCount);
  if (isWholeFrom(1, squares) && squares <= most) return [];
  const unit = conditionCount % 2 === 0 ? 'squares' : 'pairs of squares';
  const message = `Of ${conditionCount} conditions there are 1 to ${most} ${unit}, not ${squares}`;
  return [{ pointer: '/scheme/squares', code: 'unusable-square-count', message }];
}

/** How many Williams squares (pairs for odd numbers of conditions) a fraction may hold. */
function squaresMax(conditionCount: number): number {
  const isEven = conditionCount % 2 === 0;
  const rows = isEven ? conditionCount : 2 * conditionCount;
  let orders = 1;
  for (let factor = 2; factor <= conditionCount && orders <= SEQUENCES_MAX; factor += 1) {
    orders *= factor;
  }
  return Math.floor(Math.min(orders, SEQUENCES_MAX) / rows);
}

/** Faults of random orders, apart from the number of periods. */
export function randomFaults(
  { count, seed, generator }: RandomPermutations,
  conditionCount: number,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  if (conditionCount < 2) {
    const message = 'A scheme needs two conditions';
    faults.push({ pointer: '/scheme', code: 'scheme-needs-two-conditions', message });
  }
  if (!isWholeFrom(1, count) || count > SEQUENCES_MAX) {
    const message = `Random orders are drawn for 1 to ${SEQUENCES_MAX} sequences, not ${count}`;
    faults.push({ pointer: '/scheme/count', code: 'unusable-sequence-count', message });
  }
  if (!/^[0-9a-f]{16}$/.test(seed)) {
    const message = 'A seed is 16 hexadecimal digits, 0 to 9 and a to f in lower case';
    faults.push({ pointer: '/scheme/seed', code: 'malformed-seed', message });
  }
  if (generator.name !== GENERATOR.name || generator.version !== GENERATOR.version) {
    const message = `The generator is ${GENERATOR.name}, version ${GENERATOR.version}`;
    faults.push({ pointer: '/scheme/generator', code: 'unknown-generator', message });
  }
  return faults;
}

/** Faults of permutations under constraints, apart from the number of periods. */
export function constrainedFaults(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const conditionCount = conditionKeys.length;
  if (conditionCount < 2) {
    const message = 'A scheme needs two conditions';
    faults.push({ pointer: '/scheme', code: 'scheme-needs-two-conditions', message });
  }
  if (conditionCount > CONSTRAINED_CONDITIONS_MAX) {
    const message =
      `Orders under constraints are listed for at most ${CONSTRAINED_CONDITIONS_MAX} conditions, ` +
      `but there are ${conditionCount}; give a custom list of orders that meet them`;
    faults.push({ pointer: '/scheme', code: 'too-many-conditions-for-scheme', message });
  }
  faults.push(...constraintFaults(constraints, conditionKeys, '/scheme/constraints'));
  return faults;
}
