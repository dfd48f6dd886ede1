import { describe, expect, it } from 'vitest';
import { designProperties } from '#core/designs/design-properties.ts';
import { nested } from '#core/designs/nested.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { conditionBlocks } from '#core/protocol/condition-blocks.ts';
import type { BaseScheme, NestedScheme } from '#core/protocol/protocol.ts';

function crossed(outer: number, inner: number): string[] {
  const letters = (count: number, from: string) =>
    Array.from({ length: count }, (_, i) => `${from}${i}`);
  return letters(outer, 'a').flatMap((a) => letters(inner, 'b').map((b) => `${a}.${b}`));
}

describe('nested counterbalancing', () => {
  it('of two by two runs the levels of the first factor in blocks', () => {
    // common practice, no source: written out by hand
    const keys = ['hot.dry', 'hot.wet', 'cold.dry', 'cold.wet'];
    const scheme: NestedScheme = {
      kind: 'nested',
      blockedFactor: 1,
      blocks: 'williams',
      insideBlocks: 'williams',
    };
    const named = (rows: number[][]) => rows.map((row) => row.map((index) => keys[index]));
    expect(named(sequencesOf(scheme, keys, 4))).toEqual([
      ['hot.dry', 'hot.wet', 'cold.wet', 'cold.dry'],
      ['hot.wet', 'hot.dry', 'cold.dry', 'cold.wet'],
      ['cold.dry', 'cold.wet', 'hot.wet', 'hot.dry'],
      ['cold.wet', 'cold.dry', 'hot.dry', 'hot.wet'],
    ]);
    expect(named(sequencesOf({ ...scheme, blockedFactor: 2 }, keys, 4))[0]).toEqual([
      'hot.dry',
      'cold.dry',
      'cold.wet',
      'hot.wet',
    ]);
  });

  it.each([
    [2, 3],
    [3, 2],
    [3, 4],
    [4, 3],
    [5, 5],
    [2, 8],
  ])('keeps %i blocks of %i together and balanced', (outer, inner) => {
    const keys = crossed(outer, inner);
    for (const blocks of ['williams', 'cyclic-latin-square'] as BaseScheme[]) {
      for (const insideBlocks of ['williams', 'cyclic-latin-square'] as BaseScheme[]) {
        const scheme = { kind: 'nested', blockedFactor: 1, blocks, insideBlocks } as const;
        const rows = sequencesOf(scheme, keys, outer * inner);
        const properties = designProperties(rows, keys.length);
        expect(properties.uniformOnPeriods).toBe(true);
        expect(properties.uniformWithinSequences).toBe(true);
        for (const row of rows) {
          const levels = row.map((index) => Math.floor(index / inner));
          const changes = levels.slice(1).filter((level, i) => level !== levels[i]);
          expect(changes).toHaveLength(outer - 1);
        }
        if (insideBlocks !== 'williams') continue;
        // Inside blocks, ordered pairs of the inner conditions are adjacent equally often.
        const pairs = new Set<number>();
        for (const [first, line] of properties.orderedPairs.entries()) {
          for (const [second, count] of line.entries()) {
            const isInside = Math.floor(first / inner) === Math.floor(second / inner);
            if (isInside && first !== second) pairs.add(count);
          }
        }
        expect(pairs.size).toBe(1);
      }
    }
  });

  it('groups the conditions of three factors by any one of them', () => {
    const keys = ['a.x.1', 'a.x.2', 'a.y.1', 'a.y.2', 'b.x.1', 'b.x.2', 'b.y.1', 'b.y.2'];
    expect(conditionBlocks(keys, 2)).toEqual([
      [0, 1, 4, 5],
      [2, 3, 6, 7],
    ]);
    const scheme: NestedScheme = {
      kind: 'nested',
      blockedFactor: 2,
      blocks: 'complete-permutations',
      insideBlocks: 'orthogonal-latin-squares',
    };
    expect(sequencesOf(scheme, keys, 8)).toHaveLength(2 * 12);
  });

  it('refuses what cannot be nested', () => {
    const scheme = (changes: Partial<NestedScheme>): NestedScheme => ({
      kind: 'nested',
      blockedFactor: 1,
      blocks: 'williams',
      insideBlocks: 'williams',
      ...changes,
    });
    const of = (changes: Partial<NestedScheme>, keys: string[]) => () =>
      sequencesOf(scheme(changes), keys, keys.length);
    expect(of({}, ['a', 'b', 'c'])).toThrow(/two within factors/);
    expect(of({ blockedFactor: 3 }, crossed(2, 2))).toThrow(/1 to 2, not 3/);
    expect(of({ insideBlocks: 'orthogonal-latin-squares' }, crossed(2, 6))).toThrow(/insideBlocks/);
    const many = {
      blocks: 'complete-permutations',
      insideBlocks: 'complete-permutations',
    } as const;
    expect(of(many, crossed(5, 5))).toThrow(/14400 sequences, more than 5040/);
    expect(() => nested([[0]], [[0, 1]], [[0]])).toThrow(/Block 1 has no condition/);
  });
});
