import { describe, expect, it } from 'vitest';
import { runPlan } from '#core/analysis/run-plan.ts';
import { designEfficiency } from '#core/designs/efficiency.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { randomStream } from '#core/numerics/generator.ts';
import type { SchemeChoice } from '#core/protocol/protocol.ts';
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { factorOf, measureOf, protocolOf, type Row, snapshotOfRows } from './study-of-rows.ts';

const keys = ['a', 'b', 'c', 'd', 'e', 'f', 'g'];

/** Runs a scheme with one participant a sequence and noise that anyone can draw again. */
function analysed(scheme: SchemeChoice, conditions: readonly string[], periods: number) {
  const stream = randomStream('00000000000000b7', 0);
  const sequences = sequencesOf(scheme, conditions, periods);
  const rows: Row[] = sequences.flatMap((sequence, participant) => {
    const level = 10 * stream.nextUniform();
    return sequence.map((condition, index) => ({
      participant: `p${participant}`,
      condition: conditions[condition]!,
      period: index + 1,
      values: { score: level + 2 * condition - index + 3 * stream.nextUniform() },
    }));
  });
  const protocol = protocolOf({
    withinFactors: [factorOf('tool', conditions)],
    measures: [measureOf({ key: 'score' })],
    scheme,
    periods: {
      count: periods,
      repetitions: 1,
      visits: [Array.from({ length: periods }, (_, index) => index + 1)],
      washout: { minimum: 'PT0S', maximum: null },
    },
  });
  const tree = runPlan(protocol, snapshotOfRows(rows), { seed: 'any' });
  expect(nonFinitePaths(tree)).toEqual([]);
  const result = tree.measures[0]?.method;
  if (result?.method !== 'repeated-measures-anova') throw new Error('another method ran');
  return { sequences, rows, result };
}

describe('an incomplete scheme', () => {
  it('is compared by the published formula of a Youden square', () => {
    const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced: false } as const;
    const { rows, result, sequences } = analysed(scheme, keys, 4);
    expect(sequences).toHaveLength(7);
    // published: Cochran & Cox, Experimental Designs, §§9.5 and 13.2: with t = 7, k = r = 4, λ = 2
    // the condition effect is k·Q/(λt), where Q is the total of the condition less the mean of each
    // participant who met it; every condition stands in every period once.
    const adjustedTotal = (condition: string) =>
      rows
        .filter((row) => row.condition === condition)
        .reduce((sum, { participant, values }) => {
          const own = rows.filter((row) => row.participant === participant);
          const total = own.reduce((all, row) => all + Number(row.values.score), 0);
          return sum + Number(values.score) - total / 4;
        }, 0);
    const [primary] = result.comparisonSets;
    expect(primary).toMatchObject({ use: 'primary', estimate: 'adjusted-for-period' });
    expect(primary!.comparisons).toHaveLength(21);
    const errors = new Set<string>();
    for (const comparison of primary!.comparisons) {
      if (!comparison.estimable) throw new Error(comparison.detail);
      const { first, second, estimate, standardError } = comparison;
      const expected = (4 * (adjustedTotal(first) - adjustedTotal(second))) / (2 * 7);
      expect(estimate).toBeCloseTo(expected, 9);
      errors.add((standardError ?? Number.NaN).toFixed(9));
    }
    // published: ibid.: one standard error for all, σ·√(2k/(λt)); 28 observations less 7
    // participants, 3 further periods and 6 further conditions leave 12 degrees of freedom.
    expect(errors.size).toBe(1);
    expect(result.conditionAdjustedForPeriod).toMatchObject({
      estimable: true,
      degreesOfFreedom: 6,
      errorDegreesOfFreedom: 12,
    });
    const { direct } = designEfficiency(sequences, 7);
    expect(direct.contrasts[0]!.variance).toEqual({
      estimable: true,
      value: expect.closeTo((2 * 4) / (2 * 7), 12),
    });
  });

  it('says that no participant met every condition', () => {
    const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced: true } as const;
    const { result } = analysed(scheme, keys, 4);
    expect(result.anova).toMatchObject({ estimable: false, reason: 'too-few-participants' });
    expect(result.leftOut).toMatchObject({ withData: 14 });
  });
});

describe('a scheme with a condition for familiarisation', () => {
  it('compares the other conditions alone', () => {
    const scheme = {
      kind: 'constrained-permutations',
      constraints: [{ kind: 'familiarisation-first', condition: 'b' }],
    } as const;
    const { result, rows, sequences } = analysed(scheme, keys.slice(0, 4), 4);
    expect(sequences).toHaveLength(6);
    const meanOf = (condition: string) => {
      const own = rows.filter((row) => row.condition === condition);
      return own.reduce((sum, { values }) => sum + Number(values.score), 0) / own.length;
    };
    for (const set of result.comparisonSets) {
      expect(set.familySize).toBe(3);
      expect(set.comparisons.map(({ first, second }) => first + second)).toEqual([
        'ac',
        'ad',
        'cd',
      ]);
      for (const comparison of set.comparisons) {
        if (!comparison.estimable) throw new Error(comparison.detail);
        // By hand: the other three stand equally often in periods 2 to 4, once for everybody, so
        // that the difference of their plain means is free of participants and periods.
        const { first, second, estimate } = comparison;
        expect(estimate).toBeCloseTo(meanOf(first) - meanOf(second), 9);
      }
    }
    expect(result.conditionAdjustedForPeriod).toMatchObject({ reason: 'rank-deficient' });
  });
});

describe('a scheme in which conditions come twice', () => {
  it.each([
    [{ kind: 'mirrored', base: 'williams' }, 8],
    [{ kind: 'extra-period', base: 'williams' }, 5],
  ] as const)('is analysed with every observation: %j', (scheme, periods) => {
    const { result, sequences } = analysed(scheme, keys.slice(0, 4), periods);
    expect(result.anova).toMatchObject({ estimable: true });
    // By hand: observations less participants, less further periods, less further conditions
    const errorDegreesOfFreedom = sequences.length * periods - sequences.length - (periods - 1) - 3;
    expect(result.conditionAdjustedForPeriod).toMatchObject({
      estimable: true,
      degreesOfFreedom: 3,
      errorDegreesOfFreedom,
    });
  });
});
