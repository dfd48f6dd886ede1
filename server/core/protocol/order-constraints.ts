import { isWholeFrom, type ProtocolFault } from './fault.ts';
import { type OrderConstraint, SEQUENCES_MAX } from './protocol.ts';

/** The search for orders keeps a note for each set of conditions and each of its members. */
export const CONSTRAINED_CONDITIONS_MAX = 12;

/** A protocol states at most this many constraints on the order. */
const CONSTRAINTS_MAX = 200;

/** Constraints as sets of bits, so that a search asks one question a step. */
interface Permissions {
  /** By condition index: bit p is set when the condition may stand in period index p. */
  readonly periodBits: readonly number[];
  /** By condition index: bit c is set when condition c may come immediately after it. */
  readonly nextBits: readonly number[];
}

function permissionsOf(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
): Permissions {
  const all = 2 ** conditionKeys.length - 1;
  const periodBits = conditionKeys.map(() => all);
  const nextBits = conditionKeys.map(() => all);
  const bitsOf = (periods: readonly number[]) =>
    periods.reduce((bits, period) => bits | (1 << (period - 1)), 0);
  const indexOf = (key: string) => conditionKeys.indexOf(key);
  for (const constraint of constraints) {
    switch (constraint.kind) {
      case 'never-in-periods':
        periodBits[indexOf(constraint.condition)]! &= ~bitsOf(constraint.periods);
        break;
      case 'always-in-periods':
        periodBits[indexOf(constraint.condition)]! &= bitsOf(constraint.periods);
        break;
      case 'familiarisation-first':
        periodBits[indexOf(constraint.condition)]! &= 1;
        break;
      case 'never-adjacent':
        nextBits[indexOf(constraint.second)]! &= ~(1 << indexOf(constraint.first));
        nextBits[indexOf(constraint.first)]! &= ~(1 << indexOf(constraint.second));
        break;
      case 'never-in-order':
        nextBits[indexOf(constraint.first)]! &= ~(1 << indexOf(constraint.second));
        break;
    }
  }
  return { periodBits, nextBits };
}

/**
 * Every order of the conditions that meets the constraints, in lexicographic order, up to a number
 * of them.
 *
 * @param constraints   without a fault of `constraintFaults` that names a condition or a period
 * @param conditionKeys at most {@link CONSTRAINED_CONDITIONS_MAX}
 * @param most          stop after so many
 * @returns rows of condition indices, each condition once
 */
export function permittedOrders(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
  most: number,
): number[][] {
  const size = conditionKeys.length;
  const { periodBits, nextBits } = permissionsOf(constraints, conditionKeys);
  const all = 2 ** size - 1;
  // Whether the conditions not yet used can be added after the last one: it depends on which are
  // used and which was last, not on their order. Asking it first spares every dead end.
  const canEnd = new Int8Array(2 ** size * size);
  const successors = (usedBits: number, last: number): number[] => {
    const periodIndex = bitCount(usedBits);
    const found: number[] = [];
    for (let condition = 0; condition < size; condition += 1) {
      const bit = 1 << condition;
      const follows = last === NONE || (nextBits[last]! & bit) !== 0;
      const fits = ((periodBits[condition]! >> periodIndex) & 1) === 1;
      if ((usedBits & bit) === 0 && follows && fits) found.push(condition);
    }
    return found;
  };
  const ends = (usedBits: number, last: number): boolean => {
    if (usedBits === all) return true;
    const place = usedBits * size + last;
    if (canEnd[place] === 0) {
      const found = successors(usedBits, last).some((next) => ends(usedBits | (1 << next), next));
      canEnd[place] = found ? 1 : -1;
    }
    return canEnd[place] === 1;
  };
  const orders: number[][] = [];
  const extend = (order: readonly number[], usedBits: number): void => {
    if (usedBits === all) {
      orders.push([...order]);
      return;
    }
    for (const next of successors(usedBits, order.at(-1) ?? NONE)) {
      if (orders.length === most) return;
      const nowUsed = usedBits | (1 << next);
      if (ends(nowUsed, next)) extend([...order, next], nowUsed);
    }
  };
  extend([], 0);
  return orders;
}

/** Stands for the condition before the first period. */
const NONE = -1;

function bitCount(bits: number): number {
  let count = 0;
  for (let rest = bits; rest !== 0; rest &= rest - 1) count += 1;
  return count;
}

/**
 * Faults of a set of constraints: unknown conditions, a condition beside itself, periods that are
 * none, and constraints that together leave no order, or more orders than a scheme may have. Of
 * constraints that contradict each other a smallest set is named: without any one of them, the
 * others of the set leave an order.
 *
 * @param conditionKeys at most {@link CONSTRAINED_CONDITIONS_MAX}, or only the members are checked
 * @param pointer       of the list of constraints
 */
export function constraintFaults(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
  pointer: string,
): ProtocolFault[] {
  if (constraints.length > CONSTRAINTS_MAX) {
    const message = `There are ${constraints.length} constraints, more than ${CONSTRAINTS_MAX}`;
    return [{ pointer, code: 'too-many-constraints', message }];
  }
  const faults = constraints.flatMap((constraint, index) =>
    memberFaults(constraint, conditionKeys, `${pointer}/${index}`),
  );
  if (faults.length > 0 || conditionKeys.length > CONSTRAINED_CONDITIONS_MAX) return faults;
  const orders = permittedOrders(constraints, conditionKeys, SEQUENCES_MAX + 1);
  if (orders.length === 0 && conditionKeys.length > 0) {
    const named = conflict(constraints, conditionKeys).map((index) => `number ${index + 1}`);
    const message =
      named.length === 1
        ? `No order meets the constraint ${named[0]}`
        : `No order meets these constraints together: ${named.join(', ')}; leave one of them out`;
    faults.push({ pointer, code: 'contradictory-constraints', message });
  }
  if (orders.length > SEQUENCES_MAX) {
    const message =
      `More than ${SEQUENCES_MAX} orders meet the constraints, the most a scheme may have; ` +
      'constrain them further, or give a custom list of some of them';
    faults.push({ pointer, code: 'too-many-sequences', message });
  }
  return faults;
}

function memberFaults(
  constraint: OrderConstraint,
  conditionKeys: readonly string[],
  pointer: string,
): ProtocolFault[] {
  const faults: ProtocolFault[] = [];
  const named: [string, string][] = [];
  if ('condition' in constraint) named.push(['condition', constraint.condition]);
  else named.push(['first', constraint.first], ['second', constraint.second]);
  for (const [member, key] of named) {
    if (conditionKeys.includes(key)) continue;
    const message = `"${key}" is not a condition; the conditions are ${conditionKeys.join(', ')}`;
    faults.push({ pointer: `${pointer}/${member}`, code: 'unknown-condition', message });
  }
  if ('first' in constraint && constraint.first === constraint.second) {
    const message = 'No condition stands twice in an order, so it never follows itself';
    faults.push({ pointer: `${pointer}/second`, code: 'condition-beside-itself', message });
  }
  for (const [index, period] of ('periods' in constraint ? constraint.periods : []).entries()) {
    if (isWholeFrom(1, period) && period <= conditionKeys.length) continue;
    const message = `The periods are 1 to ${conditionKeys.length}, not ${period}`;
    faults.push({ pointer: `${pointer}/periods/${index}`, code: 'unknown-period', message });
  }
  return faults;
}

/** Indices of a smallest contradictory set: each is dropped for good if the rest contradict too. */
function conflict(
  constraints: readonly OrderConstraint[],
  conditionKeys: readonly string[],
): number[] {
  let kept = constraints.map((_, index) => index);
  for (const candidate of [...kept]) {
    const without = kept.filter((index) => index !== candidate);
    const rest = without.map((index) => constraints[index]!);
    if (permittedOrders(rest, conditionKeys, 1).length === 0) kept = without;
  }
  return kept;
}
