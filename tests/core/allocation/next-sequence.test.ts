import fc from 'fast-check';
import { describe, expect, it } from 'vitest';
import { slotDraw, uniformBelow } from '#core/allocation/keyed-draw.ts';
import { nextSequence } from '#core/allocation/next-sequence.ts';
import { emptyTally, type SequenceSet, tallyOf } from '#core/allocation/tally.ts';
import { designProperties } from '#core/designs/design-properties.ts';
import { type Arrival, countSlots, openStudy, rangeOf, secretOf, setOf } from './arrivals.ts';

const schemes = fc.constantFrom<SequenceSet>(
  setOf('williams', 2),
  setOf('cyclic-latin-square', 3),
  setOf('williams', 4),
  setOf('williams', 5),
  setOf('complete-permutations', 4),
);

const studies = fc
  .record({
    set: schemes,
    sites: fc.integer({ min: 1, max: 50 }),
    strata: fc.integer({ min: 1, max: 6 }),
    secretByte: fc.nat({ max: 255 }),
  })
  .chain(({ set, sites, strata, secretByte }) =>
    fc.record({
      set: fc.constant(set),
      sites: fc.constant(sites),
      strata: fc.constant(strata),
      secret: fc.constant(secretOf(secretByte)),
      arrivals: fc.array(
        fc.record({ site: fc.nat({ max: sites - 1 }), stratum: fc.nat({ max: strata - 1 }) }),
        { maxLength: 300, size: 'max' },
      ),
    }),
  );

type Ledger = ReturnType<typeof openStudy>['ledger'];

function boundOver(cells: number): number {
  return Math.max(1, Math.floor((cells + 1) / 2));
}

describe('the policy balanced, whatever the order of arrivals', () => {
  it('keeps every cell within one and every site within its proven bound', () => {
    fc.assert(
      fc.property(studies, ({ set, strata, secret, arrivals }) => {
        const { slots, arrive } = openStudy(set, secret);
        for (const arrival of arrivals) {
          const { siteId, stratum } = arrive(arrival);
          const size = set.sequences.length;
          const site = countSlots(slots, size, (slot) => slot.siteId === siteId);
          const cell = countSlots(
            slots,
            size,
            (slot) => slot.siteId === siteId && slot.stratum === stratum,
          );
          expect(rangeOf(cell)).toBeLessThanOrEqual(1);
          expect(rangeOf(site)).toBeLessThanOrEqual(boundOver(strata));
        }
      }),
      { numRuns: 60 },
    );
  });

  it('keeps the study within its proven bound when there is one stratum', () => {
    const single = studies.map((study) => ({
      ...study,
      arrivals: study.arrivals.map(({ site }) => ({ site, stratum: 0 })),
    }));
    fc.assert(
      fc.property(single, ({ set, sites, secret, arrivals }) => {
        const { ledger, arrive } = openStudy(set, secret);
        for (const arrival of arrivals) {
          arrive(arrival);
          expect(rangeOf(ledger.study.counts)).toBeLessThanOrEqual(boundOver(sites));
        }
      }),
      { numRuns: 60 },
    );
  });

  it('gives every sequence once when a cell has filled whole blocks', () => {
    const set = setOf('williams', 4);
    const { ledger, arrive } = openStudy(set, secretOf(1));
    for (let round = 0; round < 12; round += 1) arrive({ site: 0, stratum: 0 });
    expect([...ledger.study.counts]).toEqual([3, 3, 3, 3]);
  });
});

describe('an adversary who chooses who comes next', () => {
  /** Sends the arrival whose cell forces the most crowded sequence on its site and on the study. */
  function worstArrival(ledger: Ledger, sites: number, strata: number): Arrival {
    let worst: Arrival = { site: 0, stratum: 0 };
    let worstScore = Number.NEGATIVE_INFINITY;
    for (let site = 0; site < sites; site += 1) {
      const siteCounts = ledger.sites.get(`site-${site}`)?.counts ?? [];
      for (let stratum = 0; stratum < strata; stratum += 1) {
        const cell = ledger.cells.get(`site-${site}`)?.get(`stratum-${stratum}`) ?? [];
        const least = Math.min(...Array.from(cell), cell.length === 0 ? 0 : Infinity);
        const open = Array.from(ledger.study.counts.keys()).filter(
          (index) => (cell[index] ?? 0) === least,
        );
        const lead = (counts: ArrayLike<number>): number =>
          Math.min(...open.map((index) => counts[index] ?? 0)) -
          Math.min(...Array.from(ledger.study.counts, (_, index) => counts[index] ?? 0));
        const score = 1000 * lead(siteCounts) + 10 * lead(ledger.study.counts) - open.length;
        if (score <= worstScore) continue;
        worst = { site, stratum };
        worstScore = score;
      }
    }
    return worst;
  }

  /** Now and then somebody at random, so that the adversary finds its way out of a dull state. */
  function mixedArrivals(sites: number, strata: number): (ledger: Ledger) => Arrival {
    let state = 20_240_229;
    const below = (limit: number): number => {
      // published: Park, Miller & Stockmeyer 1993, Communications of the ACM 36(7):105–110
      state = (state * 48_271) % 2_147_483_647;
      return state % limit;
    };
    return (ledger) =>
      below(3) === 0
        ? { site: below(sites), stratum: below(strata) }
        : worstArrival(ledger, sites, strata);
  }

  it.each([
    [1, 1],
    [1, 2],
    [1, 3],
    [4, 3],
    [3, 5],
    [50, 2],
    [10, 6],
  ])('cannot break the bounds with %i sites and %i strata', (sites, strata) => {
    for (const set of [setOf('williams', 3), setOf('williams', 4)]) {
      const { ledger, arrive } = openStudy(set, secretOf(sites + strata));
      const choose = mixedArrivals(sites, strata);
      for (let arrival = 0; arrival < 1200; arrival += 1) {
        const { siteId, stratum } = arrive(choose(ledger));
        const cell = ledger.cells.get(siteId)?.get(stratum) ?? [];
        expect(rangeOf(cell)).toBeLessThanOrEqual(1);
        const site = ledger.sites.get(siteId)?.counts ?? [];
        expect(rangeOf(site)).toBeLessThanOrEqual(boundOver(strata));
      }
    }
  });

  it('reaches the bound of two with three strata, so the bound is not idle', () => {
    const { ledger, arrive } = openStudy(setOf('williams', 4), secretOf(3));
    const choose = mixedArrivals(1, 3);
    let widest = 0;
    for (let arrival = 0; arrival < 1200; arrival += 1) {
      arrive(choose(ledger));
      widest = Math.max(widest, rangeOf(ledger.study.counts));
    }
    expect(widest).toBe(2);
  });
});

describe('margins below the cell', () => {
  it('are taken in turn: site, then stratum, then study', () => {
    const set = {
      sequences: [
        [0, 1],
        [1, 0],
      ],
      conditionCount: 2,
    };
    const pick = (site: number[], stratum: number[], study: number[]) =>
      nextSequence({
        set,
        issued: {
          cell: new Int32Array(2),
          site: tallyOf(set, site),
          stratum: tallyOf(set, stratum),
          study: tallyOf(set, study),
        },
        draw: () => {
          throw new Error('no tie is left, so nothing may be drawn');
        },
      });
    expect(pick([1, 0], [0, 9], [0, 9])).toEqual({ sequenceIndex: 1, drawsUsed: 0 });
    expect(pick([1, 1], [2, 1], [0, 9])).toEqual({ sequenceIndex: 1, drawsUsed: 0 });
    expect(pick([1, 1], [2, 2], [5, 4])).toEqual({ sequenceIndex: 1, drawsUsed: 0 });
  });

  it('refuse counts of another length', () => {
    const set = setOf('williams', 4);
    const tally = emptyTally(set);
    const issued = { cell: new Int32Array(3), site: tally, stratum: tally, study: tally };
    const draw = slotDraw({ secret: secretOf(1), studyId: 's', siteId: 't', slotNumber: 1 });
    expect(() => nextSequence({ set, issued, draw })).toThrow(/3 counts for 4 sequences/);
    expect(() => tallyOf(set, [1, 2])).toThrow(/2 counts for 4/);
  });
});

describe('few participants over many sequences', () => {
  /** The rows' unevenness in condition by period and in ordered pairs of different conditions. */
  function unevenness(rows: readonly (readonly number[])[], size: number) {
    const { conditionByPeriod, orderedPairs } = designProperties(rows, size);
    const periods = conditionByPeriod.flat();
    const pairs = orderedPairs.flatMap((row, first) => row.filter((_, second) => second !== first));
    const squares = [...periods, ...pairs].reduce((sum, count) => sum + count ** 2, 0);
    return { squares, periodRange: rangeOf(periods), pairRange: rangeOf(pairs) };
  }

  it.each([
    [5, 20],
    [6, 24],
    [7, 28],
  ])('%i conditions and %i participants: far more even than chance', (size, participants) => {
    const set = setOf('complete-permutations', size);
    for (let byte = 0; byte < 10; byte += 1) {
      const { slots, arrive } = openStudy(set, secretOf(byte));
      for (let count = 0; count < participants; count += 1) arrive({ site: 0, stratum: 0 });
      const indices = slots.map(({ sequenceIndex }) => sequenceIndex);
      expect(new Set(indices).size).toBe(participants);
      const ours = unevenness(
        indices.map((index) => set.sequences[index] ?? []),
        size,
      );
      // common practice, no source: the same number of sequences drawn at random, none twice
      const drawn = new Set<number>();
      for (let draw = 1; drawn.size < participants; draw += 1) {
        const options = {
          secret: secretOf(byte),
          studyId: 'chance',
          siteId: 'x',
          slotNumber: draw,
        };
        drawn.add(uniformBelow(set.sequences.length, slotDraw(options)).value);
      }
      const chance = unevenness(
        Array.from(drawn, (index) => set.sequences[index] ?? []),
        size,
      );
      expect(ours.squares).toBeLessThan(chance.squares);
      expect(ours.periodRange).toBeLessThanOrEqual(2);
      expect(ours.pairRange).toBeLessThanOrEqual(3);
    }
  });

  it('evens out over the study too, when no site has enough for itself', () => {
    const set = setOf('complete-permutations', 5);
    const { slots, arrive } = openStudy(set, secretOf(5));
    for (let count = 0; count < 20; count += 1) arrive({ site: count, stratum: 0 });
    const rows = slots.map(({ sequenceIndex }) => set.sequences[sequenceIndex] ?? []);
    expect(unevenness(rows, 5).periodRange).toBeLessThanOrEqual(2);
  });
});

describe('the keyed generator', () => {
  const arrivals = Array.from({ length: 60 }, (_, i) => ({ site: i % 3, stratum: i % 2 }));
  const handOut = (byte: number): number[] => {
    const { arrive } = openStudy(setOf('williams', 6), secretOf(byte));
    return arrivals.map((arrival) => arrive(arrival).sequenceIndex);
  };

  it('gives the same allocations for the same secret, others for another', () => {
    expect(handOut(9)).toEqual(handOut(9));
    const different = new Set(Array.from({ length: 40 }, (_, byte) => handOut(byte).join()));
    expect(different.size).toBe(40);
  });
});
