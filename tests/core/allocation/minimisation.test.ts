import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { keyedChance, slotDraw, uniformBelow } from '#core/allocation/keyed-draw.ts';
import { emptyLedger, recordIssued, weightedMargins } from '#core/allocation/ledger.ts';
import {
  imbalances,
  leastImbalanced,
  minimisedSequence,
  type WeightedMargin,
} from '#core/allocation/minimisation.ts';
import type { Minimisation } from '#core/protocol/protocol.ts';
import { countSlots, openStudy, rangeOf, STUDY_ID, secretOf, setOf } from './arrivals.ts';

function policyOf(changes: Partial<Minimisation> = {}): Minimisation {
  return {
    kind: 'minimisation',
    imbalance: 'variance',
    weights: { site: 1, study: 1, factors: [{ factor: 'stratum', weight: 1 }] },
    bestProbability: 0.8,
    ...changes,
  };
}

function drawOfSlot(slotNumber: number) {
  return slotDraw({ secret: secretOf(6), studyId: STUDY_ID, siteId: 'x', slotNumber });
}

describe('the worked example of two sequences and four factors', () => {
  // from memory: Pocock 1983, Clinical Trials: A Practical Approach, the breast cancer trial of the
  // chapter on randomisation, after 80 patients. The next is ambulatory, below 50 years, with a
  // disease-free interval of two years or more and a visceral lesion; counts of A and B so far.
  const margins: WeightedMargin[] = [
    { counts: [30, 31], weight: 1 },
    { counts: [18, 17], weight: 1 },
    { counts: [9, 8], weight: 1 },
    { counts: [19, 21], weight: 1 },
  ];

  it('adds up to 76 and 77, so that A is preferred', () => {
    const sums = imbalances(margins, 'variance', 2);
    expect(sums).toEqual([76, 77]);
    expect(leastImbalanced(sums)).toEqual([0]);
  });

  it('is a tie by the range, as counted by hand', () => {
    // With A: 31−31, 19−17, 10−8, 21−20, together 5. With B: 32−30, 18−18, 9−9, 22−19, together 5.
    expect(imbalances(margins, 'range', 2)).toEqual([5, 5]);
  });
});

const marginLists = fc.integer({ min: 1, max: 6 }).chain((sequenceCount) =>
  fc.record({
    sequenceCount: fc.constant(sequenceCount),
    margins: fc.array(
      fc.record({
        counts: fc.array(fc.nat({ max: 8 }), {
          minLength: sequenceCount,
          maxLength: sequenceCount,
        }),
        weight: fc.nat({ max: 5 }),
      }),
      { minLength: 1, maxLength: 5 },
    ),
  }),
);

describe('the imbalance of Pocock and Simon', () => {
  /** As they define it: the slot is put on the sequence, and the measure is taken of the counts. */
  function defined(margins: readonly WeightedMargin[], measure: string, index: number): number {
    let sum = 0;
    for (const { counts, weight } of margins) {
      const after = Array.from(counts, (count, at) => count + (at === index ? 1 : 0));
      const total = after.reduce((a, b) => a + b, 0);
      const squares = after.reduce((a, b) => a + b * b, 0);
      // n² times the variance with divisor n is n·Σx² − (Σx)²: whole, so ties stay ties.
      const variance = after.length * squares - total * total;
      sum += weight * (measure === 'range' ? rangeOf(after) : variance);
    }
    return sum;
  }

  it.each(['range', 'variance'] as const)('by the %s ranks as its definition does', (measure) => {
    fc.assert(
      fc.property(marginLists, ({ margins, sequenceCount }) => {
        const ours = imbalances(margins, measure, sequenceCount);
        const slow = ours.map((_, index) => defined(margins, measure, index));
        if (measure === 'range') expect(ours).toEqual(slow);
        for (const [a, one] of ours.entries()) {
          for (const [b, other] of ours.entries()) {
            expect(Math.sign(one - other)).toBe(Math.sign((slow[a] ?? 0) - (slow[b] ?? 0)));
          }
        }
      }),
    );
  });

  it('refuses counts of another length, and no sequences', () => {
    const margins = [{ counts: [1, 2, 3], weight: 1 }];
    expect(() => imbalances(margins, 'range', 2)).toThrow(/3 counts for 2 sequences/);
    const nothing = { sequenceCount: 0, margins: [], policy: policyOf(), draw: drawOfSlot(1) };
    expect(() => minimisedSequence(nothing)).toThrow(/no sequences/);
  });
});

describe('the lot', () => {
  const counted = (margins: WeightedMargin[], bestProbability: number, slots: number) => {
    const counts = [0, 0, 0, 0];
    const policy = policyOf({ bestProbability });
    for (let slotNumber = 1; slotNumber <= slots; slotNumber += 1) {
      const draw = drawOfSlot(slotNumber);
      const { sequenceIndex } = minimisedSequence({ sequenceCount: 4, margins, policy, draw });
      counts[sequenceIndex] = (counts[sequenceIndex] ?? 0) + 1;
    }
    return counts;
  };
  const distance = (counts: number[], shares: number[], slots: number) =>
    counts.reduce((sum, count, index) => {
      const expected = slots * (shares[index] ?? 0);
      return sum + (count - expected) ** 2 / expected;
    }, 0);

  // published: Pocock & Simon 1975, p for the best and (1 − p)/(n − 1) for each other; a tie for
  // the best is broken by lot. reference: SciPy 1.17.1, stats.chi2.isf(1e-6, 3) = 30.665
  it.each([
    ['one best', [3, 1, 2, 2], [0.1, 0.7, 0.1, 0.1]],
    ['two best', [3, 1, 1, 2], [0.1, 0.4, 0.4, 0.1]],
    ['all alike', [2, 2, 2, 2], [0.25, 0.25, 0.25, 0.25]],
  ])('takes the best with its probability: %s', (_, counts, shares) => {
    const slots = 8000;
    const drawn = counted([{ counts, weight: 1 }], 0.7, slots);
    expect(distance(drawn, shares, slots)).toBeLessThan(30.665);
  });

  it('is not drawn when nothing is open', () => {
    const margins = [{ counts: [1, 0], weight: 1 }];
    const draw = () => {
      throw new Error('nothing may be drawn');
    };
    const policy = policyOf({ bestProbability: 1 });
    const best = minimisedSequence({ sequenceCount: 2, margins, policy, draw });
    expect(best).toEqual({ sequenceIndex: 1, drawsUsed: 0 });
    const only = [{ counts: [7], weight: 1 }];
    const single = { sequenceCount: 1, margins: only, policy: policyOf(), draw };
    expect(minimisedSequence(single)).toEqual({ sequenceIndex: 0, drawsUsed: 0 });
  });
});

describe('the margins of an arrival', () => {
  it('are its site, its level of each factor over all strata, and the study', () => {
    const set = setOf('williams', 2);
    const policy = policyOf({
      weights: {
        site: 5,
        study: 2,
        factors: [
          { factor: 'hand', weight: 3 },
          { factor: 'shift', weight: 4 },
        ],
      },
    });
    const chance = keyedChance({ secret: secretOf(1), studyId: STUDY_ID, protocolVersion: 1 });
    const plan = { set, policy, factorKeys: ['shift', 'hand'] };
    const ledger = emptyLedger(plan, chance);
    const issued: [string, string, number, number][] = [
      ['fen', 'early.left', 0, 1],
      ['fen', 'early.right', 0, 2],
      ['fen', 'late.left', 1, 4],
      ['ridge', 'early.left', 1, 8],
      ['ridge', 'late.right', 0, 16],
    ];
    for (const [siteId, stratum, sequenceIndex, count] of issued) {
      recordIssued(ledger, { siteId, stratum, sequenceIndex, count });
    }
    // Added up by hand: at Fen; left hands; early shift; everybody.
    const margins = weightedMargins(ledger, policy, { siteId: 'fen', stratum: 'early.left' });
    expect(margins.map(({ counts, weight }) => [Array.from(counts), weight])).toEqual([
      [[3, 4], 5],
      [[1, 12], 3],
      [[3, 8], 4],
      [[19, 12], 2],
    ]);
  });
});

const arrivalLists = fc.record({
  byte: fc.nat({ max: 255 }),
  imbalance: fc.constantFrom('variance' as const, 'range' as const),
  arrivals: fc.array(fc.record({ site: fc.nat({ max: 4 }), stratum: fc.nat({ max: 2 }) }), {
    maxLength: 150,
    size: 'max',
  }),
});

describe('minimisation, whatever the order of arrivals', () => {
  const set = setOf('williams', 4);
  const only = { site: 0, study: 0, factors: [{ factor: 'stratum', weight: 0 }] };

  it.each([
    ['site', { ...only, site: 1 }],
    ['factor', { ...only, factors: [{ factor: 'stratum', weight: 7 }] }],
    ['study', { ...only, study: 2 }],
  ])('keeps the one margin that counts within one, when certain: %s', (margin, weights) => {
    fc.assert(
      fc.property(arrivalLists, ({ byte, imbalance, arrivals }) => {
        const policy = policyOf({ weights, imbalance, bestProbability: 1 });
        const { slots, arrive } = openStudy(set, secretOf(byte), policy);
        for (const arrival of arrivals) {
          const { siteId, stratum } = arrive(arrival);
          const counts = countSlots(slots, 4, (slot) => {
            if (margin === 'study') return true;
            return margin === 'site' ? slot.siteId === siteId : slot.stratum === stratum;
          });
          expect(rangeOf(counts)).toBeLessThanOrEqual(1);
        }
      }),
      { numRuns: 30 },
    );
  });

  it.each(['variance', 'range'] as const)('keeps margins far more even than chance: %s', (by) => {
    /** Sum over sites, strata and study of the range of counts, over twenty studies. */
    const unevenness = (policy: Minimisation | null): number => {
      let sum = 0;
      for (let byte = 1; byte <= 20; byte += 1) {
        const { slots, arrive } = openStudy(set, secretOf(byte), policy ?? policyOf());
        for (let index = 0; index < 120; index += 1) {
          const slot = arrive({ site: (index * 7) % 5, stratum: (index * index) % 3 });
          if (policy !== null) continue;
          // common practice, no source: every sequence drawn independently of the others
          const { value } = uniformBelow(4, drawOfSlot(1000 * byte + index + 1));
          slots[slots.length - 1] = { ...slot, sequenceIndex: value };
        }
        for (let site = 0; site < 5; site += 1) {
          sum += rangeOf(countSlots(slots, 4, (slot) => slot.siteId === `site-${site}`));
        }
        for (let stratum = 0; stratum < 3; stratum += 1) {
          sum += rangeOf(countSlots(slots, 4, (slot) => slot.stratum === `stratum-${stratum}`));
        }
        sum += rangeOf(countSlots(slots, 4, () => true));
      }
      return sum;
    };
    expect(unevenness(policyOf({ imbalance: by }))).toBeLessThan(unevenness(null) / 2);
  });
});
