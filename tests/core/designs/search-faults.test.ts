import { describe, expect, it } from 'vitest';
import { designInformation } from '#core/designs/information.ts';
import { allPairs, criterionValue } from '#core/designs/search/criterion.ts';
import { searchDesign } from '#core/designs/search/search-design.ts';
import type { SearchFaultCode, SearchRequest } from '#core/designs/search/search-types.ts';
import type { OrderConstraint } from '#core/protocol/protocol.ts';
import { everyDesign, keysOf, requestFor } from './search-cases.ts';

/** Code, a part of the message, a part of the remedy, the request. */
type Case = readonly [SearchFaultCode, RegExp, RegExp, SearchRequest];

const constrained = (
  conditions: number,
  periods: number,
  constraints: readonly OrderConstraint[],
  timesMax?: number,
): SearchRequest =>
  requestFor(conditions, periods, 8, {
    limits: timesMax === undefined ? { constraints } : { constraints, timesMax },
  });

const weighing = (changes: Partial<SearchRequest['criterion']>): SearchRequest =>
  requestFor(3, 3, 6, {
    criterion: { carryoverInModel: true, direct: allPairs(3), carryover: [], ...changes },
  });

const cases: readonly Case[] = [
  ['size-out-of-range', /1 conditions/, /2 to 40 conditions/, requestFor(1, 3, 3)],
  ['size-out-of-range', /0 periods/, /1 to 60 periods/, requestFor(3, 0, 3)],
  ['size-out-of-range', /2\.5 sequences/, /1 to 1000 sequences/, requestFor(3, 3, 2.5)],
  [
    'repeated-condition',
    /"tea" stands more/,
    /once/,
    requestFor(3, 3, 6, { conditionKeys: ['tea', 'milk', 'tea'] }),
  ],
  ['malformed-seed', /"seed"/, /16/, requestFor(3, 3, 6, { seed: 'seed' })],
  ['malformed-budget', /0 evaluations/, /at least 1/, requestFor(3, 3, 6, { evaluationsMax: 0 })],
  [
    'malformed-weight',
    /weighs -1/,
    /from 0/,
    weighing({ direct: [{ first: 0, second: 1, weight: -1 }] }),
  ],
  [
    'malformed-weight',
    /indices 0 and 3/,
    /from 0 to 2/,
    weighing({ direct: [{ first: 0, second: 3, weight: 1 }] }),
  ],
  [
    'malformed-weight',
    /weighs NaN/,
    /a weight from 0/,
    weighing({ carryover: [{ first: 0, second: 1, weight: Number.NaN }] }),
  ],
  ['nothing-to-minimise', /No comparison/, /at least one/, weighing({ direct: allPairs(3, 0) })],
  [
    'carryover-not-in-model',
    /not in the model/,
    /Put carryover in/,
    weighing({ carryoverInModel: false, carryover: allPairs(3) }),
  ],
  [
    'condition-in-no-comparison',
    /"c2"/,
    /Leave "c2" out/,
    weighing({ direct: [{ first: 0, second: 1, weight: 1 }] }),
  ],
  [
    'malformed-sequence',
    /Given sequence 2/,
    /at most 3/,
    requestFor(3, 3, 6, { given: [[0], [0, 1, 2, 0]] }),
  ],
  ['malformed-sequence', /has 1 sequences/, /Give 2/, requestFor(3, 3, 2, { start: [[0, 1, 2]] })],
  [
    'start-breaks-constraints',
    /Sequence 1/,
    /no start at all/,
    requestFor(3, 3, 1, { start: [[0, 0, 1]], limits: { constraints: [], timesMax: 1 } }),
  ],
  [
    'unknown-condition',
    /"tea" is not/,
    /c0, c1, c2/,
    constrained(3, 3, [{ kind: 'familiarisation-first', condition: 'tea' }]),
  ],
  [
    'unknown-period',
    /period 4/,
    /1 to 3/,
    constrained(3, 3, [{ kind: 'never-in-periods', condition: 'c0', periods: [4] }]),
  ],
  ['malformed-times', /0 times/, /at least 1/, constrained(3, 3, [], 0)],
  [
    'more-periods-than-can-be-filled',
    /4 conditions.* cannot fill 9 periods/,
    /at most 8 periods, or let a condition recur 3 times/,
    constrained(4, 9, [], 2),
  ],
  [
    'contradictory-constraints',
    // Of three, the two that contradict each other, and not the third.
    /together: "c0" first.*; "c1" always in period 1$/,
    /one of these/,
    constrained(4, 4, [
      { kind: 'never-adjacent', first: 'c2', second: 'c3' },
      { kind: 'familiarisation-first', condition: 'c0' },
      { kind: 'always-in-periods', condition: 'c1', periods: [1] },
    ]),
  ],
  [
    'contradictory-constraints',
    // Two conditions that must alternate, and may not.
    /"c1" never immediately after "c0"/,
    /one of these/,
    constrained(2, 4, [
      { kind: 'never-adjacent', first: 'c0', second: 'c0' },
      { kind: 'never-adjacent', first: 'c1', second: 'c1' },
      { kind: 'never-in-order', first: 'c0', second: 'c1' },
    ]),
  ],
  // By counting: n participants tell n(p − 1) differences, p − 1 of them for the periods.
  ['too-few-sequences', /6 independent/, /At least 4 sequences/, requestFor(7, 3, 2)],
  // published: Jones & Kenward, chapter 2: within participants, AB and BA alone never determine the
  // direct effect adjusted for carryover; a condition met once only leaves no other sequence.
  [
    'comparisons-not-estimable',
    /"c0" against "c1"/,
    /Let conditions recur/,
    constrained(2, 2, [], 1),
  ],
  ['comparisons-not-estimable', /"c0" against "c1"/, /more periods/, requestFor(2, 1, 9)],
  // A condition that stands first, and nowhere else, is confounded with the period.
  [
    'comparisons-not-estimable',
    /"c0" against "c1" and 1 more/,
    /no weight/,
    constrained(3, 4, [{ kind: 'familiarisation-first', condition: 'c0' }]),
  ],
  // By counting enough, but by enumeration no two sequences do: the test after this one.
  [
    'comparisons-not-reached',
    /2 sequences found .* "c0" against "c1"/,
    /Plan more sequences, of which \d+ suffice/,
    requestFor(3, 3, 2),
  ],
];

describe('a search that cannot be made', () => {
  it.each(cases)('answers %s: %s', (code, message, remedy, request) => {
    const outcome = searchDesign(request);
    expect(outcome.found).toBe(false);
    const faults = outcome.found ? [] : outcome.faults;
    expect(faults.map((fault) => fault.code)).toContain(code);
    const named = faults.filter((fault) => fault.code === code);
    expect(named.some((fault) => message.test(fault.message))).toBe(true);
    expect(named.some((fault) => remedy.test(fault.remedy))).toBe(true);
  });

  it('says that comparisons are not reached where no design determines them', () => {
    const { criterion } = requestFor(3, 3, 2);
    const determined = everyDesign(3, 3, 2).filter(
      (design) => criterionValue(designInformation(design, 3), criterion).averageVariance !== null,
    );
    expect(determined).toEqual([]);
  });

  it('keeps to what the remedies say would work', () => {
    const enough = searchDesign(requestFor(7, 3, 4, { evaluationsMax: 200_000 }));
    const fewer = searchDesign(requestFor(7, 3, 3, { evaluationsMax: 200_000 }));
    expect(fewer.found).toBe(false);
    // Counting gives a bound that no design passes, which does not mean that one meets it.
    if (!enough.found) expect(enough.faults[0]?.code).toBe('comparisons-not-reached');
    const remedy = fewer.found ? '' : (fewer.faults[0]?.remedy ?? '');
    const sufficient = Number(/(\d+) drawn at random suffice/.exec(remedy)?.[1]);
    expect(searchDesign(requestFor(7, 3, sufficient)).found).toBe(true);
    expect(searchDesign(constrained(4, 8, [], 2)).found).toBe(true);
    expect(searchDesign(constrained(4, 9, [], 3)).found).toBe(true);
  });

  it('stops at a familiarisation condition only where it is compared', () => {
    const direct = allPairs(4).filter(({ first }) => first > 0);
    const outcome = searchDesign({
      ...constrained(4, 5, [{ kind: 'familiarisation-first', condition: 'c0' }]),
      criterion: { carryoverInModel: true, direct, carryover: [] },
    });
    if (!outcome.found) throw new Error(JSON.stringify(outcome.faults));
    for (const sequence of outcome.sequences) {
      expect(sequence[0]).toBe(0);
      expect(sequence.slice(1)).not.toContain(0);
    }
  });

  it('is refused in the end when the drawing of sequences cannot decide', () => {
    // Twenty conditions once each, in any order but directly after their own predecessor: easy.
    const keys = keysOf(20);
    const constraints = keys.slice(1).map((second, index) => ({
      kind: 'never-in-order' as const,
      first: keys[index]!,
      second,
    }));
    const easy = searchDesign({
      ...requestFor(20, 20, 20, { limits: { constraints, timesMax: 1 }, evaluationsMax: 2000 }),
    });
    expect(easy.found).toBe(true);
    // c0 needs a neighbour and may have none: decided only by looking at every set of conditions.
    const alone = keys.slice(1).map((second) => ({
      kind: 'never-adjacent' as const,
      first: keys[0]!,
      second,
    }));
    const hard = searchDesign(
      requestFor(20, 20, 20, { limits: { constraints: alone, timesMax: 1 }, evaluationsMax: 2000 }),
    );
    expect(hard).toMatchObject({ found: false, faults: [{ code: 'filling-undecided' }] });
  });
});
