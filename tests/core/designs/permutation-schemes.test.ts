import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { completePermutations } from '#core/designs/complete-permutations.ts';
import { constrainedPermutations } from '#core/designs/constrained-permutations.ts';
import { designProperties } from '#core/designs/design-properties.ts';
import { permutationFraction } from '#core/designs/permutation-fraction.ts';
import { randomPermutations } from '#core/designs/random-permutations.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { williamsSquare } from '#core/designs/williams.ts';
import type { OrderConstraint } from '#core/protocol/protocol.ts';

function keysOf(size: number): string[] {
  return Array.from({ length: size }, (_, index) => `c${index}`);
}

function asSet(rows: readonly (readonly number[])[]): Set<string> {
  return new Set(rows.map((row) => row.join(' ')));
}

describe('fractions of the permutations', () => {
  it.each([
    [3, 1],
    [4, 6],
    [5, 12],
    [6, 120],
    [7, 360],
  ])('of %i conditions share all permutations out over %i squares', (size, squares) => {
    // published: Lagrange's theorem, any algebra text: cosets of a subgroup partition the group, and
    // there are n!/|H| of them
    const whole = permutationFraction(size, squares);
    const every = completePermutations(size);
    expect(whole).toHaveLength(every.length);
    expect(asSet(whole)).toEqual(asSet(every));
  });

  it.each([3, 4, 5, 6, 7, 8, 9, 10, 15, 16, 33, 64])('are balanced for %i conditions', (size) => {
    for (const squares of size === 3 ? [1] : [1, 2, 3, 5]) {
      const rows = permutationFraction(size, squares);
      const properties = designProperties(rows, size);
      expect(rows).toHaveLength(squares * (size % 2 === 0 ? size : 2 * size));
      expect(asSet(rows).size).toBe(rows.length);
      expect(properties).toMatchObject({
        uniformOnPeriods: true,
        uniformWithinSequences: true,
        carryoverBalanced: true,
      });
    }
    expect(permutationFraction(size, 1)).toEqual(williamsSquare(size));
  });

  it('are built through the scheme', () => {
    const scheme = { kind: 'permutation-fraction', squares: 2 } as const;
    expect(sequencesOf(scheme, keysOf(4), 4)).toEqual(permutationFraction(4, 2));
    expect(() => sequencesOf({ ...scheme, squares: 7 }, keysOf(4), 4)).toThrow(/1 to 6 squares/);
    expect(() => sequencesOf({ ...scheme, squares: 1.5 }, keysOf(4), 4)).toThrow(/not 1.5/);
  });
});

describe('independent random orders', () => {
  const seed = '0123456789abcdef';
  const generator = { name: 'philox4x32-10', version: 1 };

  it('are the same for the same seed, and a longer list begins with the shorter one', () => {
    const long = randomPermutations({ count: 50, seed }, 9);
    expect(randomPermutations({ count: 20, seed }, 9)).toEqual(long.slice(0, 20));
    expect(randomPermutations({ count: 50, seed: '0123456789abcdee' }, 9)).not.toEqual(long);
    const scheme = { kind: 'random-permutations', count: 50, seed, generator } as const;
    expect(sequencesOf(scheme, keysOf(9), 9)).toEqual(long);
  });

  it.each([2, 3, 4, 7, 12, 64])('present each of %i conditions once', (size) => {
    for (const row of randomPermutations({ count: 30, seed }, size)) {
      expect(row.toSorted((a, b) => a - b)).toEqual(Array.from({ length: size }, (_, i) => i));
    }
  });

  it('are uniform over the orders', () => {
    // reference: SciPy 1.17.1, scipy.stats.chi2.isf(1e-6, 23) = 70.5496: a fair shuffle of 24,000
    // draws over 24 orders goes beyond it once in a million seeds
    const rows = randomPermutations({ count: 24_000, seed }, 4);
    const counts = new Map<string, number>();
    for (const row of rows) counts.set(row.join(), (counts.get(row.join()) ?? 0) + 1);
    expect(counts.size).toBe(24);
    const chiSquare = [...counts.values()].reduce((sum, n) => sum + (n - 1000) ** 2 / 1000, 0);
    expect(chiSquare).toBeLessThan(70.5496);
  });

  it.each([
    [{ count: 0 }, /1 to 5040/],
    [{ count: 5041 }, /1 to 5040/],
    [{ seed: 'ABC' }, /16 hexadecimal digits/],
    [{ generator: { name: 'other', version: 1 } }, /philox4x32-10, version 1/],
  ])('refuse %j', (changes, message) => {
    const scheme = { kind: 'random-permutations', count: 5, seed, generator, ...changes } as const;
    expect(() => sequencesOf(scheme, keysOf(4), 4)).toThrow(message);
  });
});

describe('orders under constraints', () => {
  it.each([
    [2, 1],
    [3, 3],
    [4, 11],
    [5, 53],
    [6, 309],
    [7, 2119],
  ])('of %i conditions, none right after the one before it, are %i', (size, count) => {
    // published: OEIS A000255, permutations without i immediately followed by i + 1
    const keys = keysOf(size);
    const constraints = keys.slice(1).map((second, index) => ({
      kind: 'never-in-order' as const,
      first: keys[index]!,
      second,
    }));
    expect(constrainedPermutations(constraints, keys)).toHaveLength(count);
  });

  it.each([
    [2, 1],
    [3, 2],
    [4, 9],
    [5, 44],
    [6, 265],
    [7, 1854],
  ])('of %i conditions, none in its own period, are %i', (size, count) => {
    // published: OEIS A000166, derangements
    const keys = keysOf(size);
    const constraints = keys.map((condition, index) => ({
      kind: 'never-in-periods' as const,
      condition,
      periods: [index + 1],
    }));
    expect(constrainedPermutations(constraints, keys)).toHaveLength(count);
  });

  it.each([
    [2, 0],
    [3, 2],
    [4, 12],
    [5, 72],
    [6, 480],
    [7, 3600],
  ])('of %i conditions, two of them never adjacent, are %i', (size, count) => {
    // published: OEIS A062119, m·(m + 1)! with m = n − 2: (n − 2)(n − 1)! keep two apart
    const constraint = { kind: 'never-adjacent' as const, first: 'c0', second: 'c1' };
    expect(constrainedPermutations([constraint], keysOf(size))).toHaveLength(count);
  });

  it('may have familiarisation first with eight conditions', () => {
    const constraint = { kind: 'familiarisation-first' as const, condition: 'c3' };
    const rows = constrainedPermutations([constraint], keysOf(8));
    expect(rows).toHaveLength(5040);
    expect(rows.every((row) => row[0] === 3)).toBe(true);
  });

  it('may fix the order of twelve conditions but for two places', () => {
    // By hand: each condition from the third on has its own period, the first two may be exchanged
    const keys = keysOf(12);
    const constraints = keys.slice(2).map((condition, index) => ({
      kind: 'always-in-periods' as const,
      condition,
      periods: [index + 3],
    }));
    const rest = [2, 3, 4, 5, 6, 7, 8, 9, 10, 11];
    expect(constrainedPermutations(constraints, keys)).toEqual([
      [0, 1, ...rest],
      [1, 0, ...rest],
    ]);
  });

  it('are those that a plain filter of all orders leaves', () => {
    const size = 5;
    const keys = keysOf(size);
    const key = fc.constantFrom(...keys);
    const constraint: fc.Arbitrary<OrderConstraint> = fc.oneof(
      fc.record({
        kind: fc.constantFrom('never-in-periods' as const, 'always-in-periods' as const),
        condition: key,
        periods: fc.array(fc.integer({ min: 1, max: size }), { minLength: 1, maxLength: 4 }),
      }),
      fc.record({
        kind: fc.constantFrom('never-adjacent' as const, 'never-in-order' as const),
        first: key,
        second: key,
      }),
      fc.record({ kind: fc.constant('familiarisation-first' as const), condition: key }),
    );
    const meets = (row: readonly number[], rule: OrderConstraint): boolean => {
      const period = (name: string) => row.indexOf(keys.indexOf(name)) + 1;
      switch (rule.kind) {
        case 'never-in-periods':
          return !rule.periods.includes(period(rule.condition));
        case 'always-in-periods':
          return rule.periods.includes(period(rule.condition));
        case 'familiarisation-first':
          return period(rule.condition) === 1;
        case 'never-in-order':
          return period(rule.second) !== period(rule.first) + 1;
        case 'never-adjacent':
          return Math.abs(period(rule.second) - period(rule.first)) !== 1;
      }
    };
    fc.assert(
      fc.property(fc.array(constraint, { maxLength: 4 }), (constraints) => {
        const expected = completePermutations(size).filter((row) =>
          constraints.every((rule) => meets(row, rule)),
        );
        expect(constrainedPermutations(constraints, keys)).toEqual(expected);
      }),
    );
  });
});
