import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { completePermutations } from '#core/designs/complete-permutations.ts';
import { cyclicLatinSquare } from '#core/designs/cyclic-latin-square.ts';
import { designProperties } from '#core/designs/design-properties.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { williamsSquare } from '#core/designs/williams.ts';

function from1(rows: readonly (readonly number[])[]): number[][] {
  return rows.map((row) => row.map((condition) => condition + 1));
}

function asSet(rows: readonly (readonly number[])[]): string[] {
  return rows.map((row) => row.join(' ')).sort();
}

/**
 * published: Sheehe & Bross 1961, Biometrics 17:405–414, "Latin squares to balance immediate
 * residual, and other order, effects": begin with a cyclic square, interlace each row with its own
 * reverse, slice down the middle; one half for even n, both for odd n.
 */
function interlacedSquares(size: number): number[][] {
  const halves = Array.from({ length: size }, (_, first) => {
    const row = Array.from({ length: size }, (_, i) => (first + i) % size);
    const reverse = row.toReversed();
    const interlaced = row.flatMap((entry, i) => [entry, reverse[i] ?? Number.NaN]);
    return [interlaced.slice(0, size), interlaced.slice(size)] as const;
  });
  const left = halves.map(([half]) => half);
  return size % 2 === 0 ? left : [...left, ...halves.map(([, half]) => half)];
}

describe('Williams squares', () => {
  it('match the published rows for 3, 4 and 10 conditions', () => {
    // reference: R package crossdes, manual page of williams(), output of williams(3), (4), (10)
    expect(from1(williamsSquare(3))).toEqual([
      [1, 2, 3],
      [2, 3, 1],
      [3, 1, 2],
      [3, 2, 1],
      [1, 3, 2],
      [2, 1, 3],
    ]);
    expect(from1(williamsSquare(4))).toEqual([
      [1, 2, 4, 3],
      [2, 3, 1, 4],
      [3, 4, 2, 1],
      [4, 1, 3, 2],
    ]);
    const ten = from1(williamsSquare(10));
    expect(ten[0]).toEqual([1, 2, 10, 3, 9, 4, 8, 5, 7, 6]);
    expect(ten[4]).toEqual([5, 6, 4, 7, 3, 8, 2, 9, 1, 10]);
    expect(ten[5]).toEqual([6, 7, 5, 8, 4, 9, 3, 10, 2, 1]);
    expect(ten).toHaveLength(10);
  });

  it.each([3, 4, 5, 6, 7, 8])(
    'are the interlaced squares for %i conditions, up to the names of the conditions',
    (size) => {
      // The published recipe steps down first where Williams steps up: condition k is called −k.
      const renamed = interlacedSquares(size).map((row) => row.map((k) => (size - k) % size));
      expect(asSet(williamsSquare(size))).toEqual(asSet(renamed));
    },
  );

  it.each(Array.from({ length: 29 }, (_, i) => i + 2))(
    'are balanced for first-order carryover with %i conditions',
    (size) => {
      const rows = williamsSquare(size);
      // published: Williams 1949: one square for even n, two for odd; each ordered pair as often as
      // there are squares
      const squares = size % 2 === 0 ? 1 : 2;
      const properties = designProperties(rows, size);
      expect(rows).toHaveLength(squares * size);
      expect(properties.uniformOnPeriods).toBe(true);
      expect(properties.uniformWithinSequences).toBe(true);
      expect(properties.carryoverBalanced).toBe(true);
      for (const [first, line] of properties.orderedPairs.entries()) {
        expect(line).toEqual(line.map((_, second) => (first === second ? 0 : squares)));
      }
    },
  );
});

describe('complete permutations', () => {
  it('are in lexicographic order', () => {
    // published: Knuth, The Art of Computer Programming 4A, 7.2.1.2: the permutations of {1, 2, 3}
    expect(from1(completePermutations(3))).toEqual([
      [1, 2, 3],
      [1, 3, 2],
      [2, 1, 3],
      [2, 3, 1],
      [3, 1, 2],
      [3, 2, 1],
    ]);
  });

  it.each([
    [2, 2],
    [3, 6],
    [4, 24],
    [5, 120],
    [6, 720],
    [7, 5040],
  ])('of %i conditions are %i different orders with equal counts', (size, count) => {
    const rows = completePermutations(size);
    expect(new Set(rows.map((row) => row.join())).size).toBe(count);
    expect(rows).toHaveLength(count);
    const properties = designProperties(rows, size);
    // Each condition stands in each period in (n − 1)! rows; each ordered pair is adjacent in
    // (n − 1) places times (n − 2)! rows, which is (n − 1)! too.
    expect(new Set(properties.conditionByPeriod.flat())).toEqual(new Set([count / size]));
    const pairs = properties.orderedPairs.flatMap((row, i) => row.filter((_, j) => i !== j));
    expect(new Set(pairs)).toEqual(new Set([count / size]));
    expect(properties.carryoverBalanced).toBe(true);
  });

  it('stop at seven conditions', () => {
    expect(() => completePermutations(8)).toThrow(/2 to 7/);
    expect(() => completePermutations(1)).toThrow(/2 to 7/);
  });
});

describe('cyclic Latin squares', () => {
  it('move each row on by one', () => {
    // published: the standard cyclic square of order 4, Fisher & Yates, Statistical Tables
    expect(from1(cyclicLatinSquare(4))).toEqual([
      [1, 2, 3, 4],
      [2, 3, 4, 1],
      [3, 4, 1, 2],
      [4, 1, 2, 3],
    ]);
  });

  it.each(Array.from({ length: 12 }, (_, i) => i + 2))('are Latin with %i conditions', (size) => {
    const properties = designProperties(cyclicLatinSquare(size), size);
    expect(properties.uniformOnPeriods).toBe(true);
    expect(properties.uniformWithinSequences).toBe(true);
    expect(properties.carryoverBalanced).toBe(size === 2);
  });
});

describe('the sequences of a scheme', () => {
  const keys = ['bare', 'knit', 'foam'];

  it('come from the scheme chosen', () => {
    expect(sequencesOf({ kind: 'complete-permutations' }, keys, 3)).toHaveLength(6);
    expect(sequencesOf({ kind: 'cyclic-latin-square' }, keys, 3)).toHaveLength(3);
    expect(sequencesOf({ kind: 'williams' }, keys, 3)).toHaveLength(6);
  });

  it('keep the order and the repetitions of a custom list', () => {
    const sequences = [
      ['foam', 'bare', 'knit', 'knit'],
      ['foam', 'bare', 'knit', 'knit'],
      ['bare', 'foam', 'knit', 'foam'],
    ];
    expect(sequencesOf({ kind: 'custom-list', sequences }, keys, 4)).toEqual([
      [2, 0, 1, 1],
      [2, 0, 1, 1],
      [0, 2, 1, 2],
    ]);
  });

  it.each([
    [{ kind: 'williams' }, 4, /as many periods as conditions/],
    [{ kind: 'custom-list', sequences: [] }, 3, /needs a sequence/],
    [{ kind: 'custom-list', sequences: [['bare', 'knit', 'wool']] }, 3, /"wool" is not/],
    [{ kind: 'custom-list', sequences: [['bare', 'knit']] }, 3, /has 2 periods/],
  ] as const)('are refused for %j over %i periods', (scheme, periods, message) => {
    expect(() => sequencesOf(scheme, keys, periods)).toThrow(message);
  });

  it('are the same each time', () => {
    fc.assert(
      fc.property(fc.integer({ min: 2, max: 12 }), (size) => {
        const names = Array.from({ length: size }, (_, i) => `condition-${i}`);
        const again = sequencesOf({ kind: 'williams' }, names, size);
        expect(sequencesOf({ kind: 'williams' }, names, size)).toEqual(again);
      }),
    );
  });
});
