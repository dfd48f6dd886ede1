import { describe, expect, it } from 'vitest';
import { designProperties } from '#core/designs/design-properties.ts';
import { designEfficiency, type EffectEfficiency } from '#core/designs/efficiency.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { twoConditionSequences } from '#core/designs/two-conditions.ts';
import { type SchemeChoice, TWO_CONDITION_DESIGNS } from '#core/protocol/protocol.ts';

function built(scheme: SchemeChoice, size: number, periods: number): number[][] {
  const keys = Array.from({ length: size }, (_, index) => `condition-${index}`);
  return sequencesOf(scheme, keys, periods);
}

function shareOf({ efficiency }: EffectEfficiency): number {
  return efficiency.estimable ? efficiency.value : Number.NaN;
}

const SIZES = Array.from({ length: 11 }, (_, i) => i + 2);
const BASES = ['complete-permutations', 'williams', 'orthogonal-latin-squares'] as const;

describe('extra-period schemes', () => {
  it('repeat the last condition of the Williams squares of three', () => {
    // published: Lucas 1957, Journal of Dairy Science 40:225–239: the two squares of three with the
    // last condition once more
    expect(built({ kind: 'extra-period', base: 'williams' }, 3, 4)).toEqual([
      [0, 1, 2, 2],
      [1, 2, 0, 0],
      [2, 0, 1, 1],
      [2, 1, 0, 0],
      [0, 2, 1, 1],
      [1, 0, 2, 2],
    ]);
  });

  it.each(
    BASES.flatMap((base) => SIZES.map((size) => [base, size] as const)).filter(
      ([base, size]) =>
        !(base === 'complete-permutations' && size > 6) &&
        !(base === 'orthogonal-latin-squares' && [6, 10, 12].includes(size)),
    ),
  )('on %s are strongly balanced for %i conditions', (base, size) => {
    // published: Patterson & Lucas 1959: every condition follows every condition equally often, and
    // direct effects are orthogonal to carryover: adjusting for carryover costs nothing
    const sequences = built({ kind: 'extra-period', base }, size, size + 1);
    const properties = designProperties(sequences, size);
    expect(properties.uniformOnPeriods).toBe(true);
    expect(properties.stronglyCarryoverBalanced).toBe(true);
    expect(properties.uniformWithinSequences).toBe(false);
    const { direct, directAdjusted } = designEfficiency(sequences, size);
    expect(shareOf(directAdjusted)).toBeCloseTo(shareOf(direct), 10);
  });

  it('have the efficiency of a layout with one repeat', () => {
    // By hand: within a participant of t + 1 periods a condition stands twice, so the information
    // on a difference is r − (Σ of squared and crossed counts)/(t + 1), with the periods orthogonal:
    // for t = 3, 6 sequences, r = 8: C has the diagonal 8 − (2·4 + 4·1)/4 = 5, the variance of a
    // difference is 2/(5·3/2) = 4/15, against the ideal 2/8: 15/16.
    const sequences = built({ kind: 'extra-period', base: 'williams' }, 3, 4);
    expect(shareOf(designEfficiency(sequences, 3).direct)).toBeCloseTo(15 / 16, 12);
  });
});

describe('mirrored schemes', () => {
  it('turn ABC into ABCCBA', () => {
    // common practice, no source
    expect(built({ kind: 'mirrored', base: 'cyclic-latin-square' }, 3, 6)).toEqual([
      [0, 1, 2, 2, 1, 0],
      [1, 2, 0, 0, 2, 1],
      [2, 0, 1, 1, 0, 2],
    ]);
  });

  it.each(SIZES)('give %i conditions the same mean place in each participant', (size) => {
    // By hand: a condition stands in periods j and 2n + 1 − j, whatever j is
    for (const base of ['cyclic-latin-square', 'williams'] as const) {
      const sequences = built({ kind: 'mirrored', base }, size, 2 * size);
      for (const sequence of sequences) {
        for (let condition = 0; condition < size; condition += 1) {
          const places = sequence.flatMap((entry, i) => (entry === condition ? [i + 1] : []));
          expect(places).toHaveLength(2);
          expect(places[0]! + places[1]!).toBe(2 * size + 1);
        }
      }
      expect(designProperties(sequences, size).uniformOnPeriods).toBe(true);
    }
  });

  it('give every ordered pair equally often on a square balanced for carryover', () => {
    const square = built({ kind: 'mirrored', base: 'williams' }, 4, 8);
    const { orderedPairs } = designProperties(square, 4);
    // By hand: each of the 12 ordered pairs once forwards and once backwards
    for (const [first, row] of orderedPairs.entries()) {
      for (const [second, count] of row.entries()) expect(count).toBe(first === second ? 1 : 2);
    }
    // By hand: in the cyclic square 01, 12, 23, 30 stand three times each, mirrored 10, 21, 32, 03
    const cyclic = built({ kind: 'mirrored', base: 'cyclic-latin-square' }, 4, 8);
    expect(designProperties(cyclic, 4).orderedPairs[0]).toEqual([1, 3, 0, 3]);
  });
});

describe('designs for two conditions', () => {
  it.each(TWO_CONDITION_DESIGNS)('%s is uniform on periods and symmetric', (design) => {
    // published: Jones & Kenward, chapter 3: with each sequence comes the one with A and B exchanged
    const sequences = twoConditionSequences(design);
    const written = sequences.map((row) => row.map((entry) => 'ab'[entry]).join('')).join('-');
    expect(written).toBe(design);
    expect(designProperties(sequences, 2).uniformOnPeriods).toBe(true);
    const asText = sequences.map((row) => row.join(''));
    for (const row of sequences) expect(asText).toContain(row.map((entry) => 1 - entry).join(''));
    expect(built({ kind: 'two-conditions', design }, 2, sequences[0]!.length)).toEqual(sequences);
  });

  it('has AB/BA for two periods, where carryover cannot be told apart', () => {
    // published: Jones & Kenward, chapter 2; Balaam 1968: AA and BB make it estimable within
    // participants
    const short = designEfficiency(twoConditionSequences('ab-ba'), 2);
    expect(short.directAdjusted.efficiency.estimable).toBe(false);
    const balaam = designEfficiency(twoConditionSequences('aa-bb-ab-ba'), 2);
    expect(balaam.directAdjusted.efficiency.estimable).toBe(true);
    expect(balaam.carryover.efficiency.estimable).toBe(true);
  });

  it('gives the variance of ABB/BAA found by hand', () => {
    // By hand: with A = ½ and B = −½, ABB has the within-participant sum of squares 2/3, BAA too,
    // and periods and carryover are orthogonal: the variance is 1/(4/3).
    const { directAdjusted } = designEfficiency(twoConditionSequences('abb-baa'), 2);
    const variance = directAdjusted.contrasts[0]!.variance;
    expect(variance).toEqual({ estimable: true, value: expect.closeTo(0.75, 12) });
  });

  it.each([
    [3, 2, 'abb-baa'],
    [4, 4, 'aabb-bbaa-abba-baab'],
  ] as const)('is optimal with %i periods and %i sequences', (periods, count, design) => {
    // published: Laska, Meisner & Kushner 1983: no design of that size has a smaller variance of
    // the direct difference adjusted for carryover, nor of the carryover difference
    const rows = Array.from({ length: 2 ** periods }, (_, code) =>
      Array.from({ length: periods }, (_, period) => (code >> period) & 1),
    );
    const best = designEfficiency(twoConditionSequences(design), 2);
    const varianceOf = (effect: EffectEfficiency) => {
      const variance = effect.contrasts[0]!.variance;
      return variance.estimable ? variance.value : Number.POSITIVE_INFINITY;
    };
    let tried = 0;
    const visit = (chosen: number[][], from: number): void => {
      if (chosen.length === count) {
        tried += 1;
        const other = designEfficiency(chosen, 2);
        expect(varianceOf(other.directAdjusted)).toBeGreaterThan(
          varianceOf(best.directAdjusted) - 1e-9,
        );
        expect(varianceOf(other.carryover)).toBeGreaterThan(varianceOf(best.carryover) - 1e-9);
        return;
      }
      for (let row = from; row < rows.length; row += 1) visit([...chosen, rows[row]!], row);
    };
    visit([], 0);
    // Multisets of `count` out of 2ᵖ sequences: C(9, 2) and C(19, 4).
    expect(tried).toBe(periods === 3 ? 36 : 3876);
  });
});
