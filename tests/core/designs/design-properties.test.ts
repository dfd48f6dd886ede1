import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { designProperties, wholeBlocks } from '#core/designs/design-properties.ts';

describe('design properties', () => {
  it('know a strongly balanced design', () => {
    // published: Jones & Kenward, Design and Analysis of Cross-Over Trials: Balaam's design for two
    // treatments, AA, BB, AB, BA, is strongly balanced and uniform on periods
    const properties = designProperties(
      [
        [0, 0],
        [1, 1],
        [0, 1],
        [1, 0],
      ],
      2,
    );
    expect(properties).toMatchObject({
      periods: 2,
      participantsPerBlock: 4,
      uniformOnPeriods: true,
      uniformWithinSequences: false,
      carryoverBalanced: false,
      stronglyCarryoverBalanced: true,
    });
    expect(properties.orderedPairs).toEqual([
      [1, 1],
      [1, 1],
    ]);
  });

  it('know balance at every lag apart from balance at the first', () => {
    // By hand: cyclic rows from 0 1 3 2 (a Williams square of four) have the differences 1, 2, 3 at
    // lag 1, each once, but 3, 1 at lag 2 and 2 at lag 3.
    const properties = designProperties(
      [0, 1, 2, 3].map((row) => [0, 1, 3, 2].map((entry) => (entry + row) % 4)),
      4,
    );
    expect(properties.lags.map(({ lag, balanced }) => [lag, balanced])).toEqual([
      [1, true],
      [2, false],
      [3, false],
    ]);
    expect(properties.lags[1]?.orderedPairs[0]).toEqual([0, 1, 0, 1]);
  });

  it('count as a plain search through the rows does', () => {
    const rows = fc
      .tuple(fc.integer({ min: 1, max: 5 }), fc.integer({ min: 1, max: 6 }))
      .chain(([conditionCount, periods]) => {
        const condition = fc.nat({ max: conditionCount - 1 });
        const row = fc.array(condition, { minLength: periods, maxLength: periods });
        const sequences = fc.array(row, { minLength: 1, maxLength: 8 });
        return fc.record({ conditionCount: fc.constant(conditionCount), sequences });
      });
    fc.assert(
      fc.property(rows, ({ conditionCount, sequences }) => {
        const properties = designProperties(sequences, conditionCount);
        for (let a = 0; a < conditionCount; a += 1) {
          for (let period = 0; period < properties.periods; period += 1) {
            const there = sequences.filter((row) => row[period] === a).length;
            expect(properties.conditionByPeriod[a]?.[period]).toBe(there);
          }
          for (let b = 0; b < conditionCount; b += 1) {
            const adjacent = sequences.flatMap((row) =>
              row.slice(1).filter((entry, i) => row[i] === a && entry === b),
            );
            expect(properties.orderedPairs[a]?.[b]).toBe(adjacent.length);
            for (const { lag, orderedPairs } of properties.lags) {
              const apart = sequences.flatMap((row) =>
                row.slice(lag).filter((entry, i) => row[i] === a && entry === b),
              );
              expect(orderedPairs[a]?.[b]).toBe(apart.length);
            }
          }
        }
      }),
    );
  });

  it.each([
    [[], 2, /at least one sequence/],
    [[[0, 1], [0]], 2, /differ in length/],
    [[[0, 2]], 2, /condition index 2/],
  ])('refuse %j for %i conditions', (sequences, conditionCount, message) => {
    expect(() => designProperties(sequences, conditionCount)).toThrow(message);
  });
});

describe('whole blocks', () => {
  it.each([
    [4, 48, { blocks: 12, participants: 48, aboveTarget: 0 }],
    [6, 20, { blocks: 4, participants: 24, aboveTarget: 4 }],
    [5040, 48, { blocks: 1, participants: 5040, aboveTarget: 4992 }],
    [6, 0, { blocks: 0, participants: 0, aboveTarget: 0 }],
  ])('of %i for a target of %i', (size, target, expected) => {
    expect(wholeBlocks(size, target)).toEqual(expected);
  });

  it('refuse what is not a count', () => {
    expect(() => wholeBlocks(0, 10)).toThrow(/at least one/);
    expect(() => wholeBlocks(4, 1.5)).toThrow(/whole number/);
  });
});
