import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { cyclicLatinSquare } from '#core/designs/cyclic-latin-square.ts';
import { designProperties } from '#core/designs/design-properties.ts';
import { type DesignEfficiency, designEfficiency } from '#core/designs/efficiency.ts';
import {
  addSequenceInto,
  designInformation,
  emptyInformationSums,
  informationOf,
} from '#core/designs/information.ts';
import { williamsSquare } from '#core/designs/williams.ts';
import { householderQr, linearCombination } from '#core/numerics/householder-qr.ts';
import { matrixFromRows } from '#core/numerics/matrix.ts';
import reference from '../../reference/design-efficiency.json' with { type: 'json' };

/** Percentages with two decimals, as tables of efficiencies print them. */
function percent(effect: DesignEfficiency[keyof DesignEfficiency]): string {
  const { efficiency } = effect;
  return efficiency.estimable ? (100 * efficiency.value).toFixed(2) : efficiency.reason;
}

/**
 * The plain way, with nothing absorbed: one column for every participant, period, direct and
 * carryover effect, one row an observation.
 */
function plainVariances(sequences: readonly (readonly number[])[], conditionCount: number) {
  const periods = Math.max(...sequences.map(({ length }) => length));
  const before = sequences.length + periods;
  const rows = sequences.flatMap((sequence, participant) =>
    sequence.map((condition, period) => {
      const row = new Float64Array(before + 2 * conditionCount);
      row[participant] = 1;
      row[sequences.length + period] = 1;
      row[before + condition] = 1;
      const previous = sequence[period - 1];
      if (previous !== undefined) row[before + conditionCount + previous] = 1;
      return row;
    }),
  );
  const full = householderQr(matrixFromRows(rows));
  const short = householderQr(matrixFromRows(rows.map((row) => row.slice(0, -conditionCount))));
  const variance = (qr: typeof full, offset: number, first: number, second: number) => {
    const weights = new Float64Array(qr.columns);
    weights[offset + first] = 1;
    weights[offset + second] = -1;
    const { determined, varianceFactor } = linearCombination(qr, weights);
    return determined ? varianceFactor : null;
  };
  return {
    direct: (a: number, b: number) => variance(short, before, a, b),
    directAdjusted: (a: number, b: number) => variance(full, before, a, b),
    carryover: (a: number, b: number) => variance(full, before + conditionCount, a, b),
  };
}

/** Designs of 2 to 4 conditions whose participants may stop before the last period. */
const ragged = fc.integer({ min: 2, max: 4 }).chain((conditionCount) =>
  fc.record({
    conditionCount: fc.constant(conditionCount),
    sequences: fc.array(
      fc.array(fc.nat({ max: conditionCount - 1 }), { minLength: 1, maxLength: 5 }),
      { minLength: 1, maxLength: 9 },
    ),
  }),
);

describe('efficiencies', () => {
  // published: Jones & Kenward, Design and Analysis of Cross-Over Trials, chapter 4, tables of
  // efficiencies of Williams' squares, in per cent
  it.each([
    [3, '80.00', '44.44'],
    [4, '90.91', '62.50'],
    [5, '94.74', '72.00'],
    [6, '96.55', '77.78'],
    [7, '97.56', '81.63'],
    [8, '98.18', '84.38'],
  ])('of the Williams squares of %i conditions', (size, adjusted, carryover) => {
    const efficiency = designEfficiency(williamsSquare(size), size);
    expect(percent(efficiency.direct)).toBe('100.00');
    expect(percent(efficiency.directAdjusted)).toBe(adjusted);
    expect(percent(efficiency.carryover)).toBe(carryover);
  });

  // reference: recomputed outside this project from the normal equations, for the project's brief
  it.each([
    [3, '20.00'],
    [4, '18.18'],
    [5, '15.79'],
    [6, '13.79'],
  ])('of the cyclic squares of %i conditions', (size, adjusted) => {
    const efficiency = designEfficiency(cyclicLatinSquare(size), size);
    expect(percent(efficiency.direct)).toBe('100.00');
    expect(percent(efficiency.directAdjusted)).toBe(adjusted);
  });

  it('of a balanced incomplete block design without carryover', () => {
    // published: Cochran & Cox, Experimental Designs, §9.3: E = λt/(rk). The four pairs of blocks
    // below have t = 4, k = 3, r = 3, λ = 2, so E = 8/9; periods are orthogonal (a Youden square).
    const sequences = [
      [0, 1, 2],
      [1, 2, 3],
      [2, 3, 0],
      [3, 0, 1],
    ];
    const { direct } = designEfficiency(sequences, 4);
    expect(direct.efficiency).toMatchObject({ estimable: true });
    if (direct.efficiency.estimable) expect(direct.efficiency.value).toBeCloseTo(8 / 9, 12);
  });

  it('count unequal replication as 1/ri + 1/rj', () => {
    // common practice, no source: one participant, no carryover, condition by period confounded;
    // with two participants AB and BA plus one AA, A has four observations and B two.
    const { direct } = designEfficiency(
      [
        [0, 1],
        [1, 0],
        [0, 0],
      ],
      2,
    );
    // By hand: AA only helps to estimate the period effect. Within-participant differences
    // (second − first) are π + τ, π − τ and π, so τ = half the difference of the first two:
    // variance 2·2/4 = 1. Ideal: 1/4 + 1/2.
    const [contrast] = direct.contrasts;
    expect(contrast?.variance).toMatchObject({ estimable: true });
    if (contrast?.variance.estimable) expect(contrast.variance.value).toBeCloseTo(1, 12);
    if (direct.efficiency.estimable) expect(direct.efficiency.value).toBeCloseTo(0.75, 12);
  });

  it('name disconnected comparisons and never call them infinite', () => {
    // Two groups of participants, each with its own two conditions: nothing joins the groups.
    const { direct } = designEfficiency(
      [
        [0, 1],
        [1, 0],
        [2, 3],
        [3, 2],
      ],
      4,
    );
    expect(direct.contrasts.map(({ variance }) => variance.estimable)).toEqual([
      true,
      false,
      false,
      false,
      false,
      true,
    ]);
    expect(direct.efficiency).toMatchObject({
      estimable: false,
      reason: 'disconnected',
      detail: '4 of 6 comparisons cannot be estimated.',
    });
  });

  it('of AB/BA cannot tell carryover from the direct effects', () => {
    // published: Jones & Kenward, chapter 2: within participants, the two-period two-condition
    // design does not determine carryover, nor the direct effect adjusted for it.
    const efficiency = designEfficiency(
      [
        [0, 1],
        [1, 0],
      ],
      2,
    );
    expect(percent(efficiency.direct)).toBe('100.00');
    expect(percent(efficiency.directAdjusted)).toBe('disconnected');
    expect(percent(efficiency.carryover)).toBe('disconnected');
  });

  it('agree with the model written out in full, whoever withdraws', () => {
    let determined = 0;
    fc.assert(
      fc.property(ragged, ({ sequences, conditionCount }) => {
        const plain = plainVariances(sequences, conditionCount);
        const efficiency = designEfficiency(sequences, conditionCount);
        for (const effect of ['direct', 'directAdjusted', 'carryover'] as const) {
          for (const { first, second, variance } of efficiency[effect].contrasts) {
            const expected = plain[effect](first, second);
            expect(variance.estimable).toBe(expected !== null);
            if (!variance.estimable || expected === null) continue;
            determined += 1;
            expect(Math.abs(variance.value - expected)).toBeLessThan(1e-9 * expected);
          }
        }
      }),
      { numRuns: 400, seed: 3 },
    );
    expect(determined).toBeGreaterThan(500);
  });

  it('refuse an index that is not a condition and a design without periods', () => {
    expect(() => designEfficiency([[0, 2]], 2)).toThrow(/condition index 2/);
    expect(() => designEfficiency([], 2)).toThrow(/at least one sequence/);
    expect(() => emptyInformationSums(0, 2)).toThrow(/conditionCount/);
    expect(() => addSequenceInto(emptyInformationSums(2, 1), [0, 1])).toThrow(/2 periods/);
  });
});

describe.each(reference.cases)('against R: $name', (design) => {
  // reference: R 4.2.2 with MASS, the model written out in full; tests/reference/design-efficiency.R
  it.each(['direct', 'directAdjusted', 'carryover'] as const)('%s', (effect) => {
    const { contrasts } = designEfficiency(design.sequences, design.conditionCount)[effect];
    expect(contrasts).toHaveLength(design[effect].length);
    for (const [index, { variance }] of contrasts.entries()) {
      if (!variance.estimable) throw new Error(variance.detail);
      // R's generalised inverse drops singular values below 1.5e-8 of the largest: agreement to
      // nine digits is what it can be held to.
      expect(Math.abs(variance.value / design[effect][index]! - 1)).toBeLessThan(1e-9);
    }
  });
});

describe('OrchardSprays', () => {
  it('is recognised as a Latin square', () => {
    // dataset: OrchardSprays (R datasets), whose manual page calls it a Latin square design
    const square = reference.cases[0]!;
    const properties = designProperties(square.sequences, 8);
    expect(properties).toMatchObject({
      periods: 8,
      participantsPerBlock: 8,
      uniformOnPeriods: true,
      uniformWithinSequences: true,
    });
    expect(percent(designEfficiency(square.sequences, 8).direct)).toBe('100.00');
  });
});

describe('information sums', () => {
  it('are what they were once a sequence has been added and taken away', () => {
    fc.assert(
      fc.property(ragged, ({ sequences, conditionCount }) => {
        const sums = emptyInformationSums(conditionCount, 5);
        for (const sequence of sequences) addSequenceInto(sums, sequence);
        const before = informationOf(sums);
        const extra = [conditionCount - 1, 0, 0, 1, 1];
        addSequenceInto(sums, extra, 3);
        addSequenceInto(sums, extra, -3);
        const after = informationOf(sums);
        after.withCarryover.values.forEach((value, index) => {
          expect(value).toBeCloseTo(before.withCarryover.values[index]!, 10);
        });
        const direct = designInformation(sequences, conditionCount);
        expect([...direct.replication]).toEqual([...after.replication]);
      }),
    );
  });
});
