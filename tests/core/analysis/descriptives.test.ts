import { describe, expect, it } from 'vitest';
import { analysisData } from '#core/analysis/analysis-data.ts';
import { valuesOf } from '#core/analysis/cell-summaries.ts';
import { descriptives } from '#core/analysis/descriptives.ts';
import { quantile } from '#core/analysis/quantiles.ts';
import { wilsonInterval } from '#core/analysis/wilson-interval.ts';
import type { Measure } from '#core/protocol/protocol.ts';
import reference from '../../reference/analysis-whole-plans.json' with { type: 'json' };
import { expectRelative } from '../../support/relative.ts';
import { factorOf, measureOf, protocolOf, type Row, snapshotOfRows } from './study-of-rows.ts';

function tables(measures: readonly Measure[], rows: readonly Row[]) {
  const protocol = protocolOf({ withinFactors: [factorOf('glove', ['x', 'y'])], measures });
  const data = analysisData(protocol, snapshotOfRows(rows));
  return descriptives(data, measures[0]!, valuesOf(data, measures[0]!), 0.95);
}

function row(participant: string, condition: string, values: Row['values']): Row {
  return { participant, condition, period: condition === 'x' ? 1 : 2, values };
}

describe('quantile', () => {
  // reference: R quantile(type = 7), tests/reference/analysis-whole-plans.R.
  it('equals R’s type 7', () => {
    const { values, probabilities, type7 } = reference.quantiles;
    const sorted = Float64Array.from(values).sort();
    probabilities.forEach((probability, index) => {
      expectRelative(quantile(sorted, probability), type7[index]!, 1e-14);
    });
  });

  it('refuses to answer without a value or beyond a probability', () => {
    expect(() => quantile([], 0.5)).toThrow('No value');
    expect(() => quantile([1], 1.5)).toThrow('probability');
  });
});

describe('wilsonInterval', () => {
  // published: Newcombe 1998, Statistics in Medicine 17:857, Table I, method 3 (score without
  // continuity correction), four decimals.
  it.each([
    [81, 263, 0.2553, 0.3662],
    [15, 148, 0.0624, 0.1605],
    [0, 20, 0, 0.1611],
    [1, 29, 0.0061, 0.1718],
  ])('of %d in %d is the published one', (successes, trials, lower, upper) => {
    const interval = wilsonInterval(successes, trials, 0.95);
    expect(interval.lower.toFixed(4)).toBe(lower.toFixed(4));
    expect(interval.upper.toFixed(4)).toBe(upper.toFixed(4));
  });

  it('ends exactly at none and at all, and refuses what is no proportion', () => {
    expect(wilsonInterval(0, 7, 0.9).lower).toBe(0);
    expect(wilsonInterval(7, 7, 0.9).upper).toBe(1);
    expect(() => wilsonInterval(8, 7, 0.9)).toThrow('8 of 7');
    expect(() => wilsonInterval(1, 7, 1)).toThrow('confidence level');
  });
});

describe('within-participant intervals', () => {
  // published: Morey 2008. With two conditions the corrected variance of a condition is half the
  // variance of the paired differences: here the differences are 1, 2, 3 with variance 1, so each
  // standard error is √(½/3), and Student's t at 2 degrees of freedom is 4.30265 (common tables).
  it('with two conditions are those of the paired difference over √2', () => {
    const { intervals } = tables(
      [measureOf({ key: 'score' })],
      ['a', 'b', 'c'].flatMap((id, index) => [
        row(id, 'x', { score: 10 * index + index + 1 }),
        row(id, 'y', { score: 10 * index }),
      ]),
    ).withinParticipantIntervals;
    if (!intervals.estimable) throw new Error(intervals.detail);
    for (const { mean, interval } of intervals.conditions) {
      const half = 4.30265 * Math.sqrt(0.5 / 3);
      expect(interval.upper - mean).toBeCloseTo(half, 5);
      expect(mean - interval.lower).toBeCloseTo(half, 5);
    }
  });
});

describe('what a scale adds', () => {
  // Counted by hand.
  it('gives counts a rate per exposure, of those whose exposure is known', () => {
    const measures = [
      measureOf({ key: 'errors', scale: 'count', exposure: { kind: 'measure', measure: 'words' } }),
      measureOf({ key: 'words', scale: 'count' }),
    ];
    const { byCondition } = tables(measures, [
      row('a', 'x', { errors: 3, words: 100 }),
      row('b', 'x', { errors: 5, words: 300 }),
      row('c', 'x', { errors: 9, words: null }),
    ]);
    expect(byCondition[0]?.summary.ofScale).toEqual({
      scale: 'count',
      rate: { estimable: true, total: 8, exposure: 400, rate: 0.02, exposureUnit: 'words' },
    });
    expect(byCondition[1]?.summary.ofScale).toMatchObject({ rate: { estimable: false } });
  });

  it('counts an exposure taken once a period once, however many counts there are', () => {
    const measures = [
      measureOf({ key: 'errors', scale: 'count', exposure: { kind: 'measure', measure: 'time' } }),
      measureOf({ key: 'time', taken: 'once-a-period' }),
    ];
    const { byCondition } = tables(measures, [
      { ...row('a', 'x', { errors: 3, time: null }), repetition: 1 },
      { ...row('a', 'x', { errors: 1, time: 20 }), repetition: 2 },
    ]);
    expect(byCondition[0]?.summary.ofScale).toMatchObject({
      rate: { total: 4, exposure: 20, rate: 0.2 },
    });
  });

  it('gives yes and no a share, ratings their points', () => {
    const binary = tables(
      [measureOf({ key: 'done', scale: 'binary', decimals: 0 })],
      [row('a', 'x', { done: true }), row('b', 'x', { done: false })],
    );
    expect(binary.byCondition[0]?.summary.ofScale).toMatchObject({
      proportion: { successes: 1, trials: 2, proportion: 0.5 },
    });
    const points = [1, 2, 3].map((value) => ({ value, label: `p${value}` }));
    const ordinal = tables(
      [measureOf({ key: 'comfort', scale: 'ordinal', points })],
      [row('a', 'x', { comfort: 3 }), row('b', 'x', { comfort: 3 }), row('c', 'x', { comfort: 1 })],
    );
    expect(ordinal.byCondition[0]?.summary).toMatchObject({
      distribution: { median: 3 },
      ofScale: { points: [{ trials: 1 }, { trials: 0 }, { trials: 2 }] },
    });
  });

  it('has a cell for every site, condition and period, also where nobody was', () => {
    const rows = [row('a', 'x', { score: 1 }), { ...row('b', 'y', { score: 2 }), site: 'site-2' }];
    const found = tables([measureOf({ key: 'score' })], rows);
    expect(found.bySiteAndCondition.map(({ summary }) => summary.trials)).toEqual([1, 0, 0, 1]);
    expect(found.byConditionAndPeriod.map(({ summary }) => summary.trials)).toEqual([1, 0, 0, 1]);
    expect(found.byConditionAndPeriod[1]?.summary.distribution).toMatchObject({
      estimable: false,
      reason: 'too-few-observations',
    });
  });
});
