import { DomainError } from '../errors.ts';
import { parseDuration } from '../protocol/iso8601.ts';
import type { PeriodPlan } from '../protocol/protocol.ts';

/** A period that a participant has started. */
export interface PeriodStart {
  /** From 1. */
  readonly period: number;
  /** Milliseconds since the Unix epoch. */
  readonly startedAtMs: number;
}

/**
 * What is due for a participant. `due`: may start now. `too-early`: the washout has not passed.
 * `too-late`: its maximum has. Times are milliseconds since the Unix epoch; null means no bound.
 */
export type DuePeriod =
  | { readonly state: 'finished' }
  | {
      readonly state: 'due' | 'too-early' | 'too-late';
      /** From 1: the first period that has not been started. */
      readonly period: number;
      /** From 1: the visit to which the period belongs. */
      readonly visit: number;
      readonly earliestMs: number | null;
      readonly latestMs: number | null;
    };

/**
 * Which period is due for a participant, and from when until when it may start.
 *
 * The washout runs from the latest recorded start, whichever period that was: rest is owed to what
 * was done last, also when a period was taken out of turn. Both bounds are inside the window. The
 * first period of all has no bounds.
 *
 * @param plan   the protocol's periods
 * @param starts every start recorded so far, in any order
 * @param nowMs  milliseconds since the Unix epoch
 * @throws {DomainError} when a start names a period outside the plan or one twice, or a washout
 *   duration cannot be read
 */
export function duePeriod(
  plan: Pick<PeriodPlan, 'count' | 'visits' | 'washout'>,
  starts: readonly PeriodStart[],
  nowMs: number,
): DuePeriod {
  const started = new Set<number>();
  for (const { period } of starts) {
    if (!Number.isInteger(period) || period < 1 || period > plan.count || started.has(period)) {
      throw new DomainError(`Period ${period} is started twice or not within 1 to ${plan.count}`);
    }
    started.add(period);
  }
  let period = 1;
  while (started.has(period)) period += 1;
  if (period > plan.count) return { state: 'finished' };
  const visit = plan.visits.findIndex((periods) => periods.includes(period)) + 1;
  if (starts.length === 0) {
    return { state: 'due', period, visit, earliestMs: null, latestMs: null };
  }
  const latestStartMs = Math.max(...starts.map(({ startedAtMs }) => startedAtMs));
  const { minimum, maximum } = plan.washout;
  const earliestMs = latestStartMs + parseDuration(minimum);
  const latestMs = maximum === null ? null : latestStartMs + parseDuration(maximum);
  return { state: stateOf(nowMs, earliestMs, latestMs), period, visit, earliestMs, latestMs };
}

function stateOf(
  nowMs: number,
  earliestMs: number,
  latestMs: number | null,
): 'due' | 'too-early' | 'too-late' {
  if (nowMs < earliestMs) return 'too-early';
  return latestMs !== null && nowMs > latestMs ? 'too-late' : 'due';
}
