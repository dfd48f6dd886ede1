import { describe, expect, it } from 'vitest';
import { duePeriod } from '#core/allocation/washout.ts';
import type { PeriodPlan } from '#core/protocol/protocol.ts';

const DAY = 86_400_000;
const plan: PeriodPlan = {
  count: 3,
  repetitions: 1,
  visits: [[1], [2, 3]],
  washout: { minimum: 'P7D', maximum: 'P10D' },
};
const begun = Date.UTC(2024, 2, 1, 9);
const first = [{ period: 1, startedAtMs: begun }];

// common practice, no source: the expected dates are counted by hand from the plan
describe('the period due', () => {
  it('is the first, without bounds, for somebody who has started none', () => {
    expect(duePeriod(plan, [], begun)).toEqual({
      state: 'due',
      period: 1,
      visit: 1,
      earliestMs: null,
      latestMs: null,
    });
  });

  it.each([
    [7 * DAY - 1, 'too-early'],
    [7 * DAY, 'due'],
    [10 * DAY, 'due'],
    [10 * DAY + 1, 'too-late'],
  ])('%i ms after the period before is %s', (elapsedMs, state) => {
    expect(duePeriod(plan, first, begun + elapsedMs)).toEqual({
      state,
      period: 2,
      visit: 2,
      earliestMs: Date.UTC(2024, 2, 8, 9),
      latestMs: Date.UTC(2024, 2, 11, 9),
    });
  });

  it('has no latest time without a maximum', () => {
    const open = { ...plan, washout: { minimum: 'PT0S', maximum: null } };
    expect(duePeriod(open, first, begun + 900 * DAY)).toMatchObject({
      state: 'due',
      latestMs: null,
    });
  });

  it('is the lowest not started, rested from the latest start, after one out of turn', () => {
    const starts = [{ period: 3, startedAtMs: begun + 8 * DAY }, ...first];
    expect(duePeriod(plan, starts, begun + 9 * DAY)).toEqual({
      state: 'too-early',
      period: 2,
      visit: 2,
      earliestMs: begun + 15 * DAY,
      latestMs: begun + 18 * DAY,
    });
  });

  it('is none when all have been started', () => {
    const starts = [1, 2, 3].map((period) => ({ period, startedAtMs: begun + period * 8 * DAY }));
    expect(duePeriod(plan, starts, begun)).toEqual({ state: 'finished' });
  });

  it.each([0, 4, 1.5])('cannot be told after a start of period %d', (period) => {
    expect(() => duePeriod(plan, [{ period, startedAtMs: begun }], begun)).toThrow(/1 to 3/);
  });

  it('cannot be told when a period was started twice', () => {
    expect(() => duePeriod(plan, [...first, ...first], begun)).toThrow(/twice/);
  });
});
