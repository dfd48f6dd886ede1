import { describe, expect, it } from 'vitest';
import { designProperties } from '#core/designs/design-properties.ts';
import { designEfficiency } from '#core/designs/efficiency.ts';
import { orthogonalLatinSquares } from '#core/designs/orthogonal-latin-squares.ts';

const SIZES = [2, 3, 4, 5, 7, 8, 9, 11, 13, 16, 17, 19, 23, 25, 27, 29, 31, 32, 49, 61, 64];

function squaresOf(size: number): number[][][] {
  const rows = orthogonalLatinSquares(size);
  return Array.from({ length: size - 1 }, (_, a) => rows.slice(a * size, (a + 1) * size));
}

describe('complete sets of orthogonal Latin squares', () => {
  it('are the published squares of order 4, read down the columns', () => {
    // published: Fisher & Yates, Statistical Tables, orthogonal sets of Latin squares, order 4
    const published = [
      ['1234', '2143', '3412', '4321'],
      ['1234', '3412', '4321', '2143'],
      ['1234', '4321', '2143', '3412'],
    ];
    const columns = squaresOf(4).map((square) =>
      [0, 1, 2, 3].map((period) => square.map((row) => (row[period] ?? 0) + 1).join('')),
    );
    expect(columns).toEqual(published);
  });

  it.each(SIZES.filter((size) => size <= 16))('are orthogonal for %i conditions', (size) => {
    // published: Bose 1938: laid over each other, two squares of the set show every pair once
    const squares = squaresOf(size);
    for (const [index, first] of squares.entries()) {
      for (const second of squares.slice(index + 1)) {
        const pairs = first.flatMap((row, i) => row.map((a, j) => a * size + second[i]![j]!));
        expect(new Set(pairs).size).toBe(size * size);
      }
    }
  });

  it.each(SIZES)('are balanced at every lag for %i conditions', (size) => {
    // published: Patterson 1952, Biometrika 39:32–48; a pair of periods shows each ordered pair of
    // different conditions once, and n − k pairs of periods lie k apart
    const properties = designProperties(orthogonalLatinSquares(size), size);
    expect(properties.participantsPerBlock).toBe(size * (size - 1));
    expect(properties.uniformOnPeriods).toBe(true);
    expect(properties.uniformWithinSequences).toBe(true);
    for (const { lag, balanced, orderedPairs } of properties.lags) {
      expect(balanced).toBe(true);
      expect(orderedPairs[0]![1]).toBe(size - lag);
    }
  });

  it.each([3, 4, 5, 7, 8])('are as efficient as a Williams design for %i conditions', (size) => {
    // published: Jones & Kenward, chapter 4: all designs that are uniform and balanced for
    // carryover with n periods have the efficiencies of Williams' squares
    const published = { 3: 80, 4: 90.91, 5: 94.74, 7: 97.56, 8: 98.18 };
    const { directAdjusted } = designEfficiency(orthogonalLatinSquares(size), size);
    expect(directAdjusted.efficiency).toEqual({
      estimable: true,
      value: expect.closeTo(published[size as keyof typeof published] / 100, 4),
    });
  });

  it('exist for prime powers alone', () => {
    expect(() => orthogonalLatinSquares(6)).toThrow(/not a prime power/);
  });
});
