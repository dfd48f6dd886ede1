import { describe, expect, it } from 'vitest';
import { conditionsOf, type Measure } from '#core/protocol/protocol.ts';
import { checkTrial } from '#server/trials/check-trial.ts';
import { trialRules } from '#server/trials/trial-rules.ts';
import { momentOf } from '#server/trials/trial-time.ts';
import type { TrialFields } from '#server/trials/upload-row.ts';
import { exampleProtocol } from '../support/example-protocol.ts';

const protocol = exampleProtocol([]);

/** Rules of the example protocol with only these measures. */
function rulesWith(measures: readonly Partial<Measure>[]) {
  const plain: Measure = {
    key: 'm',
    label: 'M',
    unit: null,
    scale: 'continuous',
    direction: 'neither',
    taken: 'each-trial',
    validRange: null,
    decimals: 0,
    points: null,
    exposure: null,
  };
  return trialRules({
    protocol: { ...protocol, measures: measures.map((measure) => ({ ...plain, ...measure })) },
    conditions: conditionsOf(protocol.withinFactors),
  });
}

const owner = { sequence: ['silk', 'none', 'merino', 'fleece'], periodReached: null };

function fields(changed: {
  values?: Record<string, number | boolean>;
  missing?: Record<string, string>;
  [field: string]: unknown;
}): TrialFields {
  const { values = {}, missing = {}, ...rest } = changed;
  return {
    participant: 'P01',
    period: 1,
    repetition: 1,
    condition: 'silk',
    recordId: 'r1',
    startedAt: '2026-03-02T08:00:00Z',
    endedAt: null,
    note: null,
    ...rest,
    values: new Map(Object.entries(values)),
    missing: new Map(Object.entries(missing)),
  };
}

const faultsOf = (row: TrialFields, measures: readonly Partial<Measure>[]) =>
  checkTrial(row, owner, rulesWith(measures)).faults.map(
    ({ pointer, code }) => `${pointer} ${code}`,
  );

// common practice, no source: what a value of each scale can be.
describe('a value', () => {
  const points = [1, 2, 3].map((value) => ({ value, label: String(value) }));
  const cases = [
    { scale: 'continuous', fits: [-3.5, 0, 1e9], strays: [true] },
    { scale: 'time-like', fits: [0.001, 400], strays: [0, -1, true] },
    { scale: 'count', fits: [0, 12], strays: [-1, 1.5, false, 2 ** 53] },
    { scale: 'binary', fits: [0, 1, true, false], strays: [2, -1, 0.5] },
    { scale: 'ordinal', fits: [1, 3], strays: [0, 4, 1.5, true] },
  ] as const;

  it.each(cases)('that is $scale must be of its scale', ({ scale, fits, strays }) => {
    const measure = { scale, points: scale === 'ordinal' ? points : null };
    for (const m of fits) expect(faultsOf(fields({ values: { m } }), [measure])).toEqual([]);
    for (const m of strays) {
      const faults = faultsOf(fields({ values: { m } }), [measure]);
      expect(faults, String(m)).toEqual(['/values/m not-of-the-scale']);
    }
  });

  it('is stored as a number, of a binary measure as true or false', () => {
    const rules = rulesWith([{ key: 'b', scale: 'binary' }, { key: 'c' }]);
    const { values } = checkTrial(fields({ values: { b: 1, c: 2 } }), owner, rules);
    expect([...values]).toEqual([
      ['b', true],
      ['c', 2],
    ]);
  });

  it('outside the valid range is flagged and no fault', () => {
    const rules = rulesWith([{ scale: 'time-like', validRange: { minimum: 5, maximum: 60 } }]);
    const flagsOf = (m: number) => checkTrial(fields({ values: { m } }), owner, rules);
    expect(flagsOf(400)).toMatchObject({ faults: [], flags: ['out-of-range:m'] });
    expect(flagsOf(4.99).flags).toEqual(['out-of-range:m']);
    expect(flagsOf(5).flags).toEqual([]);
    expect(flagsOf(60).flags).toEqual([]);
  });

  it('must be given or missing for a reason, and not both', () => {
    expect(faultsOf(fields({}), [{}])).toEqual(['/values/m value-needed']);
    expect(faultsOf(fields({ missing: { m: 'equipment-failure' } }), [{}])).toEqual([]);
    expect(faultsOf(fields({ missing: { m: 'He felt ill' } }), [{}])).toEqual([
      '/missing/m not-a-reason-code',
    ]);
    expect(faultsOf(fields({ values: { m: 1 }, missing: { m: 'not-taken' } }), [{}])).toEqual([
      '/missing/m value-and-missing',
    ]);
  });

  it('must be of a measure of the protocol', () => {
    const strange = fields({ values: { m: 1, x: 2 }, missing: { y: 'not-taken' } });
    expect(faultsOf(strange, [{}])).toEqual([
      '/values/x unknown-measure',
      '/missing/y unknown-measure',
    ]);
  });

  it('taken once a period stands on repetition 1 alone', () => {
    const once = [{ taken: 'once-a-period' }] as const;
    expect(faultsOf(fields({}), once)).toEqual(['/values/m value-needed']);
    expect(faultsOf(fields({ repetition: 2 }), once)).toEqual([]);
    expect(faultsOf(fields({ repetition: 2, values: { m: 1 } }), once)).toEqual([
      '/values/m taken-once-a-period',
    ]);
  });

  it('of a count over another measure needs that measure', () => {
    const count = {
      key: 'n',
      scale: 'count',
      exposure: { kind: 'measure', measure: 'm' },
    } as const;
    const without = fields({ values: { n: 2 }, missing: { m: 'not-taken' } });
    expect(faultsOf(without, [{}, count])).toEqual(['/values/m exposure-needed']);
    expect(faultsOf(fields({ values: { n: 2, m: 10 } }), [{}, count])).toEqual([]);
    const bothMissing = fields({ missing: { n: 'not-taken', m: 'not-taken' } });
    expect(faultsOf(bothMissing, [{}, count])).toEqual([]);
    const once = { taken: 'once-a-period' } as const;
    expect(faultsOf(fields({ repetition: 2, values: { n: 2 } }), [once, count])).toEqual([]);
  });
});

describe('a record', () => {
  it('must lie in the protocol, every fault at once', () => {
    const stray = fields({ period: 5, repetition: 4, condition: 'wool', values: { m: 1 } });
    expect(faultsOf(stray, [{}])).toEqual([
      '/period period-outside-sequence',
      '/repetition repetition-not-planned',
      '/condition unknown-condition',
    ]);
  });

  it('of another condition than assigned is a deviation', () => {
    const check = (condition: string) =>
      checkTrial(fields({ condition, values: { m: 1 } }), owner, rulesWith([{}]));
    expect(check('silk')).toMatchObject({ faults: [], deviation: false });
    expect(check('fleece')).toMatchObject({ faults: [], deviation: true });
  });

  it('of a period after the last that a withdrawn participant began is flagged', () => {
    const left = { ...owner, periodReached: 2 };
    const check = (period: number) =>
      checkTrial(fields({ period, values: { m: 1 } }), left, rulesWith([{}])).flags;
    expect(check(2)).toEqual([]);
    expect(check(3)).toEqual(['period-not-reached']);
  });

  it('ends no earlier than it starts', () => {
    const ended = (endedAt: string) => faultsOf(fields({ values: { m: 1 }, endedAt }), [{}]);
    expect(ended('2026-03-02T08:00:00Z')).toEqual([]);
    expect(ended('2026-03-02T10:00:00+03:00')).toEqual(['/endedAt ended-before-started']);
    expect(ended('later')).toEqual(['/endedAt not-a-time']);
  });
});

describe('a time', () => {
  // published: RFC 3339 section 5.8, the examples and what they stand for.
  it('is read with its offset', () => {
    expect(momentOf('1985-04-12T23:20:50.52Z')).toBe(Date.UTC(1985, 3, 12, 23, 20, 50, 520));
    expect(momentOf('1996-12-19T16:39:57-08:00')).toBe(Date.UTC(1996, 11, 20, 0, 39, 57));
    expect(momentOf('2026-03-02T08:00+01:00')).toBe(Date.UTC(2026, 2, 2, 7));
  });

  // published: ISO 8601-1:2019 section 4.3 (calendar), 5.4.2 (without an offset it is local time).
  it('is none without offset, or on a day or hour that is not', () => {
    const none = [
      '2026-03-02T08:00:00',
      '2026-03-02',
      '2026-02-30T08:00:00Z',
      '2026-02-29T08:00:00Z',
      '2026-13-01T08:00:00Z',
      '2026-03-02T25:00:00Z',
      '02/03/2026 08:00',
      '2026-03-02 08:00:00Z',
    ];
    for (const text of none) expect(momentOf(text), text).toBeNull();
    expect(momentOf('2028-02-29T08:00:00Z')).not.toBeNull();
  });
});
