import type { RandomStream } from '../../numerics/generator.ts';
import type { OrderConstraint } from '../../protocol/protocol.ts';
import { type SequenceLimits, type SequenceRules, sequenceRules } from './sequence-rules.ts';

/**
 * How many beginnings of sequences one draw may look at. Those that lead nowhere are remembered, so
 * that without a limit on times a draw looks at few more than periods × conditions of them.
 */
const BEGINNINGS_MAX = 200_000;

/** What a draw gives: a sequence, the proof that none exists, or neither within the limit. */
export type SequenceDraw = Int32Array | 'impossible' | 'undecided';

/** Draws sequences that keep the rules. */
export interface SequenceDrawer {
  /**
   * A random sequence. Conditions that the participant has met least come first, unless `anyOrder`:
   * then every sequence that keeps the rules can come out.
   *
   * @param usedSoFar how often each condition stands in sequences drawn before: among those equally
   *   often met by the participant the least used come first
   */
  draw(stream: RandomStream, anyOrder: boolean, usedSoFar?: ArrayLike<number>): SequenceDraw;
}

/**
 * A drawer by depth-first search in random order.
 *
 * What can still follow depends on the period, the last condition, which required conditions are
 * still to come and, where times are limited, how often each condition was met. Such states from
 * which no sequence can be completed are kept over all draws, since they do not depend on the order
 * tried.
 */
export function sequenceDrawer(
  rules: SequenceRules,
  beginningsMax = BEGINNINGS_MAX,
): SequenceDrawer {
  const { conditionCount, periods, allowedIn, mayFollow, required, timesMax } = rules;
  const deadEnds = new Set<string>();
  const limited = timesMax < periods;
  const sequence = new Int32Array(periods);
  const times = new Int32Array(conditionCount);
  const stateKey = (period: number) => {
    const met = limited ? times.join() : required.map((c) => (times[c]! > 0 ? 1 : 0)).join('');
    return `${period}:${period > 0 ? sequence[period - 1] : ''}:${met}`;
  };

  const candidatesIn = (period: number): number[] => {
    const candidates: number[] = [];
    for (let condition = 0; condition < conditionCount; condition += 1) {
      if (allowedIn[period * conditionCount + condition] !== 1) continue;
      if (times[condition]! >= timesMax) continue;
      if (period === 0 || mayFollow[sequence[period - 1]! * conditionCount + condition] === 1) {
        candidates.push(condition);
      }
    }
    return candidates;
  };

  const draw: SequenceDrawer['draw'] = (stream, anyOrder, usedSoFar = times) => {
    times.fill(0);
    let looked = 0;
    const complete = (period: number): boolean | 'undecided' => {
      const missing = required.filter((condition) => times[condition] === 0).length;
      if (missing > periods - period) return false;
      if (period === periods) return true;
      looked += 1;
      if (looked > beginningsMax) return 'undecided';
      const key = stateKey(period);
      if (deadEnds.has(key)) return false;
      const candidates = shuffled(candidatesIn(period), stream);
      if (!anyOrder) {
        candidates.sort(
          (one, other) => times[one]! - times[other]! || usedSoFar[one]! - usedSoFar[other]!,
        );
      }
      for (const condition of candidates) {
        sequence[period] = condition;
        times[condition]! += 1;
        const outcome = complete(period + 1);
        times[condition]! -= 1;
        if (outcome !== false) return outcome;
      }
      deadEnds.add(key);
      return false;
    };
    const outcome = complete(0);
    if (outcome === 'undecided') return 'undecided';
    return outcome ? Int32Array.from(sequence) : 'impossible';
  };
  return { draw };
}

/** The same values in random order. Source: Durstenfeld 1964, Communications of the ACM 7:420. */
export function shuffled(values: readonly number[], stream: RandomStream): number[] {
  const result = [...values];
  for (let last = result.length - 1; last > 0; last -= 1) {
    const other = stream.nextBelow(last + 1);
    const kept = result[last]!;
    result[last] = result[other]!;
    result[other] = kept;
  }
  return result;
}

/**
 * A smallest set of constraints that already leave no sequence under the limit on times, in that
 * without any one of them the others would leave some: each is dropped for good if the rest
 * contradict too, within what one draw may look at, shared among them. Empty when the limit on
 * times alone leaves none.
 *
 * @param limits that together leave no sequence
 */
export function conflictingConstraints(
  limits: SequenceLimits,
  conditionKeys: readonly string[],
  periods: number,
  stream: RandomStream,
): OrderConstraint[] {
  let kept = [...limits.constraints];
  const share = Math.ceil(BEGINNINGS_MAX / kept.length);
  for (const constraint of limits.constraints) {
    const without = kept.filter((other) => other !== constraint);
    const rules = sequenceRules({ ...limits, constraints: without }, conditionKeys, periods);
    if (sequenceDrawer(rules, share).draw(stream, false) === 'impossible') kept = without;
  }
  return kept;
}
