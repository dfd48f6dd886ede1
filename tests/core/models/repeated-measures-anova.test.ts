import fc from 'fast-check';
import { describe, expect, test } from 'vitest';
import { DomainError } from '#core/errors.ts';
import { repeatedMeasuresAnova } from '#core/models/repeated-measures-anova.ts';
import type {
  AnovaEffect,
  RepeatedMeasuresOptions,
  RepeatedMeasuresTable,
} from '#core/models/repeated-measures-types.ts';
import { randomStream } from '#core/numerics/generator.ts';
import reference from '../../reference/repeated-measures-anova.json' with { type: 'json' };
import { nonFinitePaths } from '../../support/finite-numbers.ts';
import { expectRelative } from '../../support/relative.ts';

function effectsOf(table: RepeatedMeasuresTable, options?: RepeatedMeasuresOptions) {
  const result = repeatedMeasuresAnova(table, options);
  if (!result.estimable) throw new Error(result.detail);
  return result.effects;
}

const nameOf = (factors: readonly string[]) => [...factors].sort().join(':');

function effectNamed(effects: readonly AnovaEffect[], factors: readonly string[]) {
  const effect = effects.find((candidate) => nameOf(candidate.factors) === nameOf(factors));
  if (!effect?.estimable) throw new Error(`no effect ${factors.join(':')}`);
  return effect;
}

type Eta = Record<string, Record<string, number>>;

// dataset: ergoStool (R package nlme), OBrienKaiser (R package carData).
// reference: R 4.2.2, car 3.1-1 Anova(type = 3), afex 1.2-1 aov_car for eta squared;
// tests/reference/repeated-measures-anova.R. Both are double precision: 1e-9 shows agreement.
describe.each(reference.cases)('$name', (reference) => {
  const table: RepeatedMeasuresTable = reference;
  const effects = effectsOf(table);

  test('every effect of the reference is there, and no other', () => {
    const expected = reference.effects.map((effect) => nameOf(effect.factors)).sort();
    expect(effects.map((effect) => nameOf(effect.factors)).sort()).toEqual(expected);
  });

  test.each(reference.effects)('$factors: sums of squares, F and p', (expected) => {
    const effect = effectNamed(effects, expected.factors);
    expectRelative(effect.sumOfSquares, expected.sumOfSquares, 1e-9, 'sum of squares');
    expectRelative(effect.errorSumOfSquares, expected.errorSumOfSquares, 1e-9, 'error');
    expect(effect.degreesOfFreedom).toBe(expected.degreesOfFreedom);
    expect(effect.errorDegreesOfFreedom).toBe(expected.errorDegreesOfFreedom);
    expectRelative(effect.fStatistic, expected.fStatistic, 1e-9, 'F');
    expectRelative(effect.pValue, expected.pValue, 1e-8, 'p');
  });

  test.each(reference.effects)('$factors: sphericity', (expected) => {
    const { sphericity } = effectNamed(effects, expected.factors);
    if (!('ggEpsilon' in expected)) {
      expect(sphericity).toEqual({ applicable: false });
      return;
    }
    if (!sphericity.applicable) throw new Error('sphericity should apply');
    const { mauchly, greenhouseGeisser, huynhFeldt } = sphericity;
    if (!mauchly.estimable || !huynhFeldt.estimable) throw new Error('should be estimable');
    // published: Mauchly 1940; R computes W from a product of eigenvalues.
    expectRelative(mauchly.w, expected.mauchlyW!, 1e-8, 'W');
    expectRelative(mauchly.pValue, expected.mauchlyP!, 1e-8, 'p of W');
    expectRelative(greenhouseGeisser.epsilon, expected.ggEpsilon!, 1e-9, 'GG');
    expectRelative(greenhouseGeisser.pValue, expected.ggPValue!, 1e-8, 'p of GG');
    expectRelative(huynhFeldt.rawEpsilon, expected.hfEpsilon!, 1e-9, 'HF');
    expect(huynhFeldt.epsilon).toBe(Math.min(1, huynhFeldt.rawEpsilon));
    expectRelative(huynhFeldt.pValue, expected.hfPValue!, 1e-8, 'p of HF');
    const { degreesOfFreedom } = greenhouseGeisser;
    expectRelative(degreesOfFreedom, expected.degreesOfFreedom * expected.ggEpsilon!, 1e-9);
  });

  test.each(reference.effects)('$factors: eta squared', ({ factors }) => {
    const etaSquared: Eta = reference.etaSquared;
    const byName = (kind: string) =>
      Object.entries(etaSquared[kind]!).find(([key]) => nameOf(key.split(':')) === nameOf(factors));
    const effect = effectNamed(effects, factors);
    expectRelative(effect.generalisedEtaSquared, byName('ges')![1], 1e-9);
    expectRelative(effect.partialEtaSquared, byName('pes')![1], 1e-9);
  });

  test('generalised eta squared with a measured factor', () => {
    const measured: Eta | null = reference.etaSquaredMeasured;
    if (measured === null) return;
    const own = effectsOf(table, { measuredBetweenFactors: reference.measuredBetweenFactors });
    const entries = Object.entries(measured.ges!);
    expect(entries.length).toBe(own.length);
    for (const [name, expected] of entries) {
      expectRelative(effectNamed(own, name.split(':')).generalisedEtaSquared, expected, 1e-9);
    }
  });

  test('permuting participants, adding to a participant, and noise of 1e-12', () => {
    const stream = randomStream('00000000000000aa', 1);
    const withinOnly = (list: readonly AnovaEffect[]) =>
      list.filter((effect) => effect.withinFactors.length > 0).map(numbersOf);
    const permuted = effectsOf({ ...table, participants: table.participants.toReversed() });
    const noisy = effectsOf(changed((value) => value + 1e-12 * (stream.nextUniform() - 0.5)));
    const shifted = effectsOf(changed((value, row) => value + 10 * row));
    expectClose(permuted.map(numbersOf), effects.map(numbersOf), 1e-10);
    expectClose(noisy.map(numbersOf), effects.map(numbersOf), 1e-9);
    expectClose(withinOnly(shifted), withinOnly(effects), 1e-9);
    function changed(change: (value: number, row: number) => number): RepeatedMeasuresTable {
      const participants = table.participants.map((participant, row) => ({
        ...participant,
        values: participant.values.map((value) => change(value!, row)),
      }));
      return { ...table, participants };
    }
  });
});

function numbersOf(effect: AnovaEffect): number[] {
  if (!effect.estimable) throw new Error(effect.detail);
  return [effect.sumOfSquares, effect.errorSumOfSquares, effect.fStatistic, effect.pValue];
}

function expectClose(actual: number[][], expected: number[][], tolerance: number): void {
  expect(actual.length).toBe(expected.length);
  actual.forEach((row, i) => {
    row.forEach((value, j) => {
      expectRelative(value, expected[i]![j]!, tolerance, `effect ${i}, number ${j}`);
    });
  });
}

function oneFactor(rows: readonly (readonly (number | null)[])[]): RepeatedMeasuresTable {
  const levelKeys = (rows[0] ?? []).map((_, index) => `c${index}`);
  return {
    withinFactors: [{ key: 'condition', levelKeys }],
    betweenFactors: [],
    participants: rows.map((values, row) => ({ key: `p${row}`, betweenLevelKeys: [], values })),
  };
}

describe('what cannot be estimated says so', () => {
  test.each([
    [
      'incomplete-data',
      oneFactor([
        [1, 2],
        [3, null],
        [2, 4],
      ]),
    ],
    ['too-few-participants', oneFactor([[1, 2, 3]])],
    ['too-few-participants', { ...oneFactor([[1, 2]]), participants: [] }],
    ['too-few-conditions', oneFactor([[1], [2], [3]])],
    [
      'constant-response',
      oneFactor([
        [4, 4, 4],
        [4, 4, 4],
      ]),
    ],
  ] as const)('%s', (reason, table) => {
    expect(repeatedMeasuresAnova(table)).toMatchObject({ estimable: false, reason });
  });

  test('an effect whose error is zero, while the others are estimated', () => {
    const [effect] = effectsOf(
      oneFactor([
        [1, 2, 4.1],
        [2, 3, 5.1],
        [0.3, 1.3, 3.4],
      ]),
    );
    expect(effect).toMatchObject({ estimable: false, reason: 'zero-error-variance' });
  });

  test('groups without participants, and groups of one each', () => {
    const grouped = (groups: readonly string[], levelKeys: readonly string[]) => ({
      ...oneFactor(groups.map((_, row) => [row, row + 1, row * row])),
      betweenFactors: [{ key: 'group', levelKeys }],
      participants: groups.map((group, row) => ({
        key: `p${row}`,
        betweenLevelKeys: [group],
        values: [row, row + 1, row * row],
      })),
    });
    const empty = repeatedMeasuresAnova(grouped(['a', 'a', 'b', 'b'], ['a', 'b', 'c']));
    expect(empty).toMatchObject({ estimable: false, reason: 'empty-between-cell' });
    const single = repeatedMeasuresAnova(grouped(['a', 'b', 'c'], ['a', 'b', 'c']));
    expect(single).toMatchObject({ estimable: false, reason: 'no-error-degrees-of-freedom' });
  });

  test('two participants: a test, but neither Mauchly nor Huynh–Feldt', () => {
    const effects = effectsOf(
      oneFactor([
        [1, 2, 4],
        [2, 5, 4],
      ]),
    );
    const effect = effectNamed(effects, ['condition']);
    expect(effect.errorDegreesOfFreedom).toBe(2);
    expect(effect.sphericity).toMatchObject({
      applicable: true,
      mauchly: { estimable: false, reason: 'singular-covariance' },
      huynhFeldt: { estimable: false, reason: 'undefined-correction' },
    });
  });

  test('a factor with one level', () => {
    const table = oneFactor([
      [1, 2, 4],
      [2, 5, 4],
      [0, 3, 7],
    ]);
    const effects = effectsOf({
      ...table,
      withinFactors: [...table.withinFactors, { key: 'only', levelKeys: ['one'] }],
    });
    const reasons = effects.map((effect) => (effect.estimable ? '' : effect.reason));
    expect(reasons).toEqual(['', 'too-few-conditions', 'too-few-conditions']);
  });

  test('no number is ever NaN or infinite', () => {
    const cell = fc.oneof(
      fc.integer({ min: 0, max: 3 }),
      fc.double({ noNaN: true, min: -1e99, max: 1e99 }),
    );
    const row = fc.array(cell, { minLength: 3, maxLength: 3 });
    fc.assert(
      fc.property(fc.array(row, { minLength: 1, maxLength: 6 }), (rows) => {
        expect(nonFinitePaths(repeatedMeasuresAnova(oneFactor(rows)))).toEqual([]);
      }),
      { numRuns: 500 },
    );
  });
});

describe('tables that contradict themselves are refused', () => {
  const table = oneFactor([
    [1, 2],
    [3, 5],
    [2, 4],
  ]);
  test.each([
    ['a value too few', { participants: [{ key: 'p', betweenLevelKeys: [], values: [1] }] }],
    [
      'the same participant twice',
      { participants: [...table.participants, table.participants[0]!] },
    ],
    [
      'an infinite value',
      oneFactor([
        [1, Number.POSITIVE_INFINITY],
        [1, 2],
      ]),
    ],
    [
      'a value that is not a number',
      oneFactor([
        [1, Number.NaN],
        [1, 2],
      ]),
    ],
    ['a level too many', { participants: [{ key: 'p', betweenLevelKeys: ['x'], values: [1, 2] }] }],
    [
      'an unknown level',
      {
        betweenFactors: [{ key: 'group', levelKeys: ['a'] }],
        participants: [{ key: 'p', betweenLevelKeys: ['x'], values: [1, 2] }],
      },
    ],
    ['a factor twice', { withinFactors: [...table.withinFactors, ...table.withinFactors] }],
  ])('%s', (_, change) => {
    expect(() => repeatedMeasuresAnova({ ...table, ...change })).toThrow(DomainError);
  });

  test('a measured factor that is not in the table', () => {
    const options = { measuredBetweenFactors: ['age'] };
    expect(() => repeatedMeasuresAnova(table, options)).toThrow(DomainError);
  });
});
