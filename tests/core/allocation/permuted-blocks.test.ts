import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { keyedChance } from '#core/allocation/keyed-draw.ts';
import { emptyLedger, issueNext, recordIssued } from '#core/allocation/ledger.ts';
import { openBlock } from '#core/allocation/permuted-blocks.ts';
import type { PolicyChoice } from '#core/protocol/protocol.ts';
import { countSlots, openStudy, rangeOf, STUDY_ID, secretOf, setOf } from './arrivals.ts';

const set = setOf('williams', 4);
const SIZE = set.sequences.length;

function policyOf(multiples: readonly number[]): PolicyChoice {
  return { kind: 'permuted-blocks', multiples };
}

function chanceOf(byte: number) {
  return keyedChance({ secret: secretOf(byte), studyId: STUDY_ID, protocolVersion: 1 });
}

/** A generator whose first word is this, whatever the draw. */
function drawOf(word: number) {
  const bytes = new Uint8Array(4);
  new DataView(bytes.buffer).setUint32(0, word);
  return () => bytes;
}

const studies = fc.record({
  multiples: fc.uniqueArray(fc.integer({ min: 1, max: 4 }), { minLength: 1, maxLength: 4 }),
  byte: fc.nat({ max: 255 }),
  arrivals: fc.array(fc.record({ site: fc.nat({ max: 3 }), stratum: fc.nat({ max: 2 }) }), {
    maxLength: 200,
    size: 'max',
  }),
});

describe('permuted blocks, whatever the order of arrivals', () => {
  it('keep cells within the largest multiple and margins within the sum of their cells', () => {
    fc.assert(
      fc.property(studies, ({ multiples, byte, arrivals }) => {
        const { slots, arrive } = openStudy(set, secretOf(byte), policyOf(multiples));
        const largest = Math.max(...multiples);
        for (const arrival of arrivals) {
          const { siteId, stratum } = arrive(arrival);
          const count = (where: Parameters<typeof countSlots>[2]) =>
            rangeOf(countSlots(slots, SIZE, where));
          const inCell = count((slot) => slot.siteId === siteId && slot.stratum === stratum);
          expect(inCell).toBeLessThanOrEqual(largest);
          expect(count((slot) => slot.siteId === siteId)).toBeLessThanOrEqual(3 * largest);
          expect(count((slot) => slot.stratum === stratum)).toBeLessThanOrEqual(4 * largest);
          expect(count(() => true)).toBeLessThanOrEqual(12 * largest);
        }
      }),
      { numRuns: 60 },
    );
  });

  it('cut a cell into blocks that hold every sequence equally often', () => {
    fc.assert(
      fc.property(studies, ({ multiples, byte }) => {
        const { slots, arrive } = openStudy(set, secretOf(byte), policyOf(multiples));
        for (let count = 0; count < 100; count += 1) arrive({ site: 0, stratum: 0 });
        const chance = chanceOf(byte);
        let start = 0;
        for (let block = 1; start + SIZE * Math.max(...multiples) <= 100; block += 1) {
          const { multiple } = openBlock({
            cell: new Int32Array(SIZE),
            multiples,
            drawOf: () => chance.block('site-0', 'stratum-0', block),
          });
          expect(multiples).toContain(multiple);
          const rows = slots.slice(start, start + SIZE * multiple);
          expect(countSlots(rows, SIZE, () => true)).toEqual(new Array(SIZE).fill(multiple));
          start += rows.length;
        }
      }),
      { numRuns: 40 },
    );
  });

  it('go on alike from stored counts and from the ledger that was kept', () => {
    const policy = policyOf([1, 2, 3]);
    const { slots, arrive } = openStudy(set, secretOf(9), policy);
    for (let count = 0; count < 90; count += 1) {
      const fresh = emptyLedger({ set, policy, factorKeys: ['stratum'] }, chanceOf(9));
      for (const slot of slots) recordIssued(fresh, { ...slot, count: 1 });
      const next = arrive({ site: count % 2, stratum: count % 3 });
      const { sequenceIndex, drawsUsed } = next;
      expect(issueNext(fresh, next)).toEqual({ sequenceIndex, drawsUsed });
    }
  });
});

describe('chance within blocks', () => {
  it('reaches the bound, so it is not idle', () => {
    const { slots, arrive } = openStudy(set, secretOf(1), policyOf([3]));
    let widest = 0;
    for (let count = 0; count < 600; count += 1) {
      arrive({ site: 0, stratum: 0 });
      widest = Math.max(widest, rangeOf(countSlots(slots, SIZE, () => true)));
    }
    expect(widest).toBe(3);
  });

  it('draws every multiple equally often', () => {
    const multiples = [1, 2, 3];
    const chance = chanceOf(3);
    const counts = [0, 0, 0];
    const blocks = 9000;
    for (let block = 1; block <= blocks; block += 1) {
      const cell = new Int32Array(SIZE);
      const { multiple } = openBlock({
        cell,
        multiples,
        drawOf: () => chance.block('s', 'all', block),
      });
      counts[multiple - 1] = (counts[multiple - 1] ?? 0) + 1;
    }
    const expected = blocks / 3;
    const statistic = counts.reduce((sum, count) => sum + (count - expected) ** 2 / expected, 0);
    // published: the upper tail of chi-squared with 2 degrees of freedom is exp(−x/2), so
    // x = −2 ln 1e-6 = 27.631 fails once in a million secrets
    expect(statistic).toBeLessThan(27.631);
  });

  it('makes every order of a block equally likely', () => {
    const two = setOf('williams', 2);
    const orders = new Map<string, number>();
    const studiesDrawn = 6000;
    for (let study = 0; study < studiesDrawn; study += 1) {
      const secret = new Uint8Array(32);
      new DataView(secret.buffer).setUint32(0, study);
      const { slots, arrive } = openStudy(two, secret, policyOf([2]));
      for (let count = 0; count < 4; count += 1) arrive({ site: 0, stratum: 0 });
      const order = slots.map(({ sequenceIndex }) => sequenceIndex).join('');
      orders.set(order, (orders.get(order) ?? 0) + 1);
    }
    // published: two sequences twice each have 4! / (2! 2!) = 6 orders
    expect([...orders.keys()].sort()).toEqual(['0011', '0101', '0110', '1001', '1010', '1100']);
    const expected = studiesDrawn / 6;
    const statistic = [...orders.values()].reduce((sum, n) => sum + (n - expected) ** 2, 0);
    // reference: SciPy 1.17.1, stats.chi2.isf(1e-6, 5) = 35.888
    expect(statistic / expected).toBeLessThan(35.888);
  });
});

describe('the open block', () => {
  it('follows from the counts alone', () => {
    // Blocks of 2, 1, 2 times each sequence: words 1, 0, 1 of the multiples 1 and 2.
    const words = [1, 0, 1];
    const sized = (blockNumber: number) => drawOf(words[blockNumber - 1] ?? 0);
    const cell = Int32Array.of(4, 3, 3, 5);
    const block = openBlock({ cell, multiples: [1, 2], drawOf: sized });
    expect(block.multiple).toBe(2);
    expect([...block.remaining]).toEqual([1, 2, 2, 0]);
    expect(block.complete).toEqual({ blocks: 2, perSequence: 3 });
    expect(openBlock({ ...block, cell, multiples: [1, 2], drawOf: sized })).toEqual(block);
  });

  it('refuses counts that no such blocks give', () => {
    const cell = Int32Array.of(3, 0, 0, 0);
    const drawOfOne = () => drawOf(0);
    expect(() => openBlock({ cell, multiples: [1], drawOf: drawOfOne })).toThrow(/3, 0, 0, 0/);
    const none = new Int32Array(0);
    expect(() => openBlock({ cell: none, multiples: [1], drawOf: drawOfOne })).toThrow(/sequences/);
    expect(() => openBlock({ cell, multiples: [], drawOf: drawOfOne })).toThrow(/range/);
  });
});
