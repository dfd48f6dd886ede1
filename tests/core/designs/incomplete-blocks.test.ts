import { describe, expect, it } from 'vitest';
import { designProperties } from '#core/designs/design-properties.ts';
import { designEfficiency, type EffectEfficiency } from '#core/designs/efficiency.ts';
import { incompleteBlocks } from '#core/designs/incomplete-blocks.ts';
import { sequencesOf } from '#core/designs/sequences-of.ts';
import { schemeFaults } from '#core/protocol/check-scheme.ts';

function keysOf(size: number): string[] {
  return Array.from({ length: size }, (_, index) => `c${index}`);
}

/** Entry [i][j]: in how many sequences i and j (i ≠ j) both stand, where `counts` lets them. */
function concurrences(
  rows: readonly (readonly number[])[],
  size: number,
  counts: (row: readonly number[], i: number, j: number) => boolean = () => true,
): number[] {
  const table = Array.from({ length: size }, () => new Array<number>(size).fill(0));
  for (const row of rows) {
    for (const i of row) {
      for (const j of row) if (i !== j && counts(row, i, j)) table[i]![j]! += 1;
    }
  }
  return table.flatMap((line, i) => line.filter((_, j) => i !== j));
}

function variances({ contrasts }: EffectEfficiency): (number | null)[] {
  return contrasts.map(({ variance }) => (variance.estimable ? variance.value : null));
}

function expectBalanced(rows: readonly (readonly number[])[], size: number, periods: number) {
  const properties = designProperties(rows, size);
  const replication = (rows.length * periods) / size;
  const lambda = (replication * (periods - 1)) / (size - 1);
  expect(properties.uniformOnPeriods).toBe(true);
  for (const row of rows) expect(new Set(row).size).toBe(periods);
  // published: Cochran & Cox, Experimental Designs, §9.3: λ(t − 1) = r(k − 1), a whole number
  expect(Number.isInteger(lambda)).toBe(true);
  expect(new Set(concurrences(rows, size))).toEqual(new Set([lambda]));
  // published: ibid., the efficiency factor E = λt/(rk); periods are orthogonal
  const { direct } = designEfficiency(rows, size);
  const factor = (lambda * size) / (replication * periods);
  expect(direct.efficiency).toEqual({ estimable: true, value: expect.closeTo(factor, 10) });
}

function expectCarryoverBalanced(rows: readonly (readonly number[])[], size: number) {
  expect(designProperties(rows, size).carryoverBalanced).toBe(true);
  // published: Patterson & Lucas 1962: also each condition in the last period equally often with
  // every other in the same sequence; then the first periods are balanced too
  const last = concurrences(rows, size, (row, i) => row.at(-1) === i);
  expect(new Set(last).size).toBe(1);
  // published: ibid.: all comparisons have one variance, direct and carryover alike
  const { directAdjusted, carryover } = designEfficiency(rows, size);
  for (const effect of [directAdjusted, carryover]) {
    const [first, ...others] = variances(effect);
    for (const other of others) {
      if (first === null || first === undefined) expect(other).toBe(first);
      else expect(other! / first).toBeCloseTo(1, 8);
    }
  }
}

const SIZES = Array.from({ length: 11 }, (_, i) => i + 3).flatMap((size) =>
  Array.from({ length: size - 2 }, (_, i) => [size, i + 2] as const),
);

describe('balanced incomplete blocks', () => {
  it.each(SIZES)('of %i conditions in %i periods are balanced', (size, periods) => {
    const rows = incompleteBlocks(size, periods, false);
    expectBalanced(rows, size, periods);
    const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced: false } as const;
    expect(sequencesOf(scheme, keysOf(size), periods)).toEqual(rows);
  });

  it.each(SIZES)(
    'of %i conditions in %i periods can be balanced for carryover',
    (size, periods) => {
      const rows = incompleteBlocks(size, periods, true);
      expectBalanced(rows, size, periods);
      expectCarryoverBalanced(rows, size);
      const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced: true } as const;
      expect(sequencesOf(scheme, keysOf(size), periods)).toEqual(rows);
    },
  );

  // published: Cochran & Cox, Experimental Designs, §13.2 and its plans of Youden squares: t = b, r = k
  it.each([
    [3, 2, 1],
    [4, 3, 2],
    [5, 4, 3],
    [6, 5, 4],
    [7, 3, 1],
    [7, 4, 2],
    [7, 6, 5],
    [11, 5, 2],
    [11, 6, 3],
    [13, 4, 1],
    [13, 9, 6],
    [15, 7, 3],
    [15, 8, 4],
    [16, 6, 2],
    [16, 10, 6],
    [19, 9, 4],
    [19, 10, 5],
    [21, 5, 1],
    [21, 16, 12],
    [23, 11, 5],
    [23, 12, 6],
    [31, 6, 1],
    [31, 15, 7],
    [31, 16, 8],
    [31, 25, 20],
    [37, 9, 2],
  ])('are a Youden square for %i conditions in %i periods, λ = %i', (size, periods, lambda) => {
    const rows = incompleteBlocks(size, periods, false);
    expect(rows).toHaveLength(size);
    expectBalanced(rows, size, periods);
    expect(new Set(concurrences(rows, size))).toEqual(new Set([lambda]));
  });

  // published: Fisher & Yates, Statistical Tables, balanced incomplete blocks: t, k, r, λ of the
  // smallest designs whose number of blocks is a multiple of t
  it.each([
    [5, 2, 4, 1],
    [5, 3, 6, 3],
    [7, 2, 6, 1],
    [9, 4, 8, 3],
    [9, 5, 10, 5],
    [10, 4, 12, 4],
    [13, 3, 6, 1],
  ])('need the published replication for %i in %i', (size, periods, replication, lambda) => {
    const rows = incompleteBlocks(size, periods, false);
    expect((rows.length * periods) / size).toBe(replication);
    expect(new Set(concurrences(rows, size))).toEqual(new Set([lambda]));
  });

  // from memory: sizes in the tables of Patterson & Lucas 1962
  it.each([
    [4, 3, 12],
    [7, 3, 21],
    [7, 4, 14],
  ])('balanced for carryover need %i conditions, %i periods, %i sequences', (size, periods, n) => {
    expect(incompleteBlocks(size, periods, true)).toHaveLength(n);
  });

  it.each([14, 15, 16, 17, 18, 20, 22, 24, 33])(
    'of %i conditions may leave just one condition out',
    (size) => {
      const rows = incompleteBlocks(size, size - 1, false);
      expect(rows).toHaveLength(size);
      expectBalanced(rows, size, size - 1);
    },
  );

  it.each([
    [16, 3],
    [16, 15],
    [17, 4],
    [19, 2],
    [25, 5],
  ])('balanced for carryover exist for prime powers: %i in %i', (size, periods) => {
    const rows = incompleteBlocks(size, periods, true);
    expect(rows).toHaveLength(size * (size - 1));
    expectBalanced(rows, size, periods);
    expectCarryoverBalanced(rows, size);
  });

  it.each([
    [true, 4, 4, 'scheme-needs-other-periods', /2 to 3 periods, .* has 4; a Williams design/],
    [true, 4, 1, 'scheme-needs-other-periods', /2 to 3 periods/],
    [true, 2, 1, 'too-few-conditions-for-scheme', /three conditions/],
    [true, 14, 5, 'no-such-design', /up to 13 conditions and for prime powers; 14 is none/],
    [false, 14, 5, 'no-such-design', /known here for 13 periods, not for 5/],
    [false, 19, 5, 'no-such-design', /for 9, 10, 18 periods, not for 5; balanced for carryover/],
  ])('are refused: carryover %s, %i in %i', (carryoverBalanced, size, periods, code, message) => {
    const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced } as const;
    const faults = schemeFaults(scheme, keysOf(size), periods);
    expect(faults.map((fault) => fault.code)).toEqual([code]);
    expect(faults[0]!.message).toMatch(message);
    expect(() => sequencesOf(scheme, keysOf(size), periods)).toThrow(message);
  });

  it('are built wherever no fault is found', () => {
    for (let size = 3; size <= 64; size += 1) {
      for (let periods = 2; periods < size; periods += 1) {
        for (const carryoverBalanced of [false, true]) {
          const scheme = { kind: 'balanced-incomplete-blocks', carryoverBalanced } as const;
          if (schemeFaults(scheme, keysOf(size), periods).length > 0) {
            expect(size).toBeGreaterThan(13);
          } else if (periods < 4 || size < 14 || !carryoverBalanced) {
            const rows = incompleteBlocks(size, periods, carryoverBalanced);
            expect(rows.length % size).toBe(0);
          }
        }
      }
    }
  });
});
