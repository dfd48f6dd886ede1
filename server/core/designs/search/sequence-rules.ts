import type { OrderConstraint } from '../../protocol/protocol.ts';

/** What every sequence is to keep: constraints, and how often a condition may recur. */
export interface SequenceLimits {
  /**
   * As in a protocol, with two differences, since here a condition may recur or be left out: one
   * that is "always" in some periods, or first for familiarisation, stands there at least once for
   * every participant and nowhere else; and a condition may be "never adjacent" to itself.
   */
  readonly constraints: readonly OrderConstraint[];
  /** How often a participant may meet one condition; absent: any number of times. */
  readonly timesMax?: number;
}

/** Limits as tables, for t conditions and p periods, both counted from 0. */
export interface SequenceRules {
  readonly conditionCount: number;
  readonly periods: number;
  /** p × t, row-major: 1 where the condition may stand in the period. */
  readonly allowedIn: Uint8Array;
  /** t × t, row-major, entry [first][second]: 1 where `second` may come immediately after. */
  readonly mayFollow: Uint8Array;
  /** Conditions that every participant meets at least once. */
  readonly required: readonly number[];
  /** How often one participant may meet a condition; p when nothing limits it. */
  readonly timesMax: number;
}

/**
 * The limits as tables.
 *
 * @param limits        whose conditions and periods exist
 * @param conditionKeys the conditions; an index is the place in this array
 */
export function sequenceRules(
  limits: SequenceLimits,
  conditionKeys: readonly string[],
  periods: number,
): SequenceRules {
  const conditionCount = conditionKeys.length;
  const allowedIn = new Uint8Array(periods * conditionCount).fill(1);
  const mayFollow = new Uint8Array(conditionCount * conditionCount).fill(1);
  const required = new Set<number>();
  const indexOf = (key: string) => conditionKeys.indexOf(key);
  const forbidWhere = (condition: number, isForbidden: (period: number) => boolean) => {
    for (let index = 0; index < periods; index += 1) {
      if (isForbidden(index + 1)) allowedIn[index * conditionCount + condition] = 0;
    }
  };
  const requireAlone = (condition: number, numbers: readonly number[]) => {
    required.add(condition);
    forbidWhere(condition, (period) => !numbers.includes(period));
    const [only, ...others] = new Set(numbers);
    if (only === undefined || others.length > 0) return;
    for (let other = 0; other < conditionCount; other += 1) {
      if (other !== condition) forbidWhere(other, (period) => period === only);
    }
  };
  for (const constraint of limits.constraints) {
    switch (constraint.kind) {
      case 'never-in-periods':
        forbidWhere(indexOf(constraint.condition), (n) => constraint.periods.includes(n));
        break;
      case 'always-in-periods':
        requireAlone(indexOf(constraint.condition), constraint.periods);
        break;
      case 'familiarisation-first':
        requireAlone(indexOf(constraint.condition), [1]);
        break;
      case 'never-adjacent':
        mayFollow[indexOf(constraint.second) * conditionCount + indexOf(constraint.first)] = 0;
        mayFollow[indexOf(constraint.first) * conditionCount + indexOf(constraint.second)] = 0;
        break;
      case 'never-in-order':
        mayFollow[indexOf(constraint.first) * conditionCount + indexOf(constraint.second)] = 0;
        break;
    }
  }
  const timesMax = Math.min(limits.timesMax ?? periods, periods);
  return { conditionCount, periods, allowedIn, mayFollow, required: [...required], timesMax };
}

/** Whether a whole sequence of p condition indices keeps every rule. */
export function keepsRules(sequence: ArrayLike<number>, rules: SequenceRules): boolean {
  const { conditionCount, periods, allowedIn, mayFollow, required, timesMax } = rules;
  if (sequence.length !== periods) return false;
  const times = new Uint32Array(conditionCount);
  for (let period = 0; period < periods; period += 1) {
    const condition = sequence[period]!;
    if (allowedIn[period * conditionCount + condition] !== 1) return false;
    if (period > 0 && mayFollow[sequence[period - 1]! * conditionCount + condition] !== 1) {
      return false;
    }
    times[condition]! += 1;
    if (times[condition]! > timesMax) return false;
  }
  return required.every((condition) => times[condition]! > 0);
}

/** A constraint in words. */
export function constraintInWords(constraint: OrderConstraint): string {
  switch (constraint.kind) {
    case 'never-in-periods':
      return `"${constraint.condition}" never in period ${constraint.periods.join(', ')}`;
    case 'always-in-periods':
      return `"${constraint.condition}" always in period ${constraint.periods.join(' or ')}`;
    case 'familiarisation-first':
      return `"${constraint.condition}" first, for familiarisation, and in no other period`;
    case 'never-adjacent':
      return `"${constraint.first}" and "${constraint.second}" never adjacent`;
    case 'never-in-order':
      return `"${constraint.second}" never immediately after "${constraint.first}"`;
  }
}
