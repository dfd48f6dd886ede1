import { describe, expect, it } from 'vitest';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { type Mutable, validProtocol } from './valid-protocol.ts';

type Draft = Mutable<Protocol>;
type Case = readonly [spoil: (draft: Draft) => unknown, ...faults: (readonly [string, string])[]];

function faultsOf(spoil: (draft: Draft) => unknown): [string, string][] {
  const draft = validProtocol();
  spoil(draft);
  return checkProtocol(draft).map(({ pointer, code }) => [pointer, code]);
}

/** Each case spoils a valid protocol; the faults, all of them and no other, come in this order. */
function each(cases: Record<string, Case>): void {
  it.each(Object.entries(cases))('%s', (_, [spoil, ...faults]) => {
    expect(faultsOf(spoil)).toEqual(faults);
  });
}

const m = '/measures';
const a = '/analysis/measures';

// common practice, no source: what may be registered is the project's own rule, stated in the
// docstrings; pointers are RFC 6901
describe('a valid protocol', () => {
  each({
    'has no fault': [() => {}],
    'may leave out between factors and maximum washout': [
      (p) => {
        p.betweenFactors = [];
        p.periods.washout.maximum = null;
      },
    ],
    'may repeat a sequence of a custom list, and have more periods than conditions': [
      (p) => {
        const row = ['warm.open', 'warm.shaded', 'cold.open', 'cold.shaded', 'warm.open'];
        p.scheme = { kind: 'custom-list', sequences: [row, row, row.toReversed()] };
        p.periods.count = 5;
        p.periods.visits = [[1], [2, 3, 4, 5]];
      },
    ],
  });
});

describe('faults of factors', () => {
  each({
    'blank title': [(p) => (p.title = ' '), ['/title', 'blank-title']],
    'duplicate hypothesis': [
      (p) => p.hypotheses.push({ key: 'glare-slows', statement: 'again' }),
      ['/hypotheses/1/key', 'duplicate-key'],
    ],
    'malformed key': [
      (p) => (p.betweenFactors[0]!.key = 'Age Group'),
      ['/betweenFactors/0/key', 'malformed-key'],
    ],
    'key too long': [
      (p) => (p.betweenFactors[0]!.key = 'a'.repeat(41)),
      ['/betweenFactors/0/key', 'malformed-key'],
    ],
    'factor both within and between': [
      (p) => (p.betweenFactors[0]!.key = 'lamp'),
      ['/betweenFactors/0/key', 'duplicate-key'],
    ],
    'one level only': [
      (p) => p.betweenFactors[0]!.levels.pop(),
      ['/betweenFactors/0/levels', 'fewer-than-two-levels'],
    ],
    'no conditions': [
      (p) => (p.withinFactors = []),
      ['/withinFactors', 'fewer-than-two-conditions'],
      ['/scheme', 'scheme-needs-two-conditions'],
      ['/scheme', 'scheme-needs-periods-equal-to-conditions'],
      [`${a}/0/contrasts/reference`, 'unknown-condition'],
    ],
    'more conditions than can be listed': [
      (p) => {
        const levels = Array.from({ length: 33 }, (_, i) => ({ key: `l${i}`, label: `${i}` }));
        p.withinFactors[0]!.levels = levels;
      },
      ['/withinFactors', 'too-many-conditions'],
    ],
    'more strata than can be balanced': [
      (p) => {
        const levels = Array.from({ length: 257 }, (_, i) => ({ key: `l${i}`, label: `${i}` }));
        p.betweenFactors[0]!.levels = levels;
      },
      ['/betweenFactors', 'too-many-strata'],
    ],
  });
});

describe('faults of the scheme', () => {
  const eight = (p: Draft): void => {
    p.withinFactors[0]!.levels = ['a', 'b', 'c', 'warm'].map((key) => ({ key, label: key }));
    p.periods.count = 8;
    p.periods.visits = [[1, 2, 3, 4, 5, 6, 7, 8]];
  };
  each({
    'fewer periods than conditions': [
      (p) => {
        p.periods.count = 3;
        p.periods.visits = [[1, 2, 3]];
        p.exclusions.pop();
      },
      ['/scheme', 'scheme-needs-periods-equal-to-conditions'],
    ],
    'complete permutations of eight conditions': [
      (p) => {
        eight(p);
        p.scheme = { kind: 'complete-permutations' };
      },
      ['/scheme', 'too-many-conditions-for-scheme'],
    ],
    'empty custom list': [
      (p) => (p.scheme = { kind: 'custom-list', sequences: [] }),
      ['/scheme/sequences', 'no-sequences'],
    ],
    'custom list that is too long': [
      (p) => {
        const row = ['warm.open', 'warm.shaded', 'cold.open', 'cold.shaded'];
        const sequences = Array.from({ length: 5041 }, () => row);
        p.scheme = { kind: 'custom-list', sequences };
      },
      ['/scheme/sequences', 'too-many-sequences'],
    ],
    'custom list with a wrong length, an unknown and a forgotten condition': [
      (p) => {
        p.scheme = {
          kind: 'custom-list',
          sequences: [
            ['warm.open', 'warm.shaded', 'cold.open'],
            ['warm.open', 'warm.shaded', 'cold.open', 'dim.open'],
          ],
        };
        p.analysis.measures = p.analysis.measures.slice(0, 1);
        p.measures = p.measures.slice(0, 1);
        p.exclusions = [];
      },
      ['/scheme/sequences/0', 'sequence-length-not-periods'],
      ['/scheme/sequences/1/3', 'unknown-condition'],
      ['/scheme/sequences', 'condition-never-presented'],
      [`${a}/0/method`, 'method-needs-every-condition'],
    ],
  });
});

describe('faults of periods, washout and sites', () => {
  const visits = ['/periods/visits', 'visits-do-not-partition-periods'] as const;
  each({
    'one period': [
      (p) => {
        p.periods.count = 1;
        p.periods.visits = [[1]];
        p.exclusions.pop();
      },
      ['/scheme', 'scheme-needs-periods-equal-to-conditions'],
      ['/periods/count', 'unusable-period-count'],
    ],
    'no repetition': [
      (p) => (p.periods.repetitions = 0),
      ['/periods/repetitions', 'unusable-repetitions'],
    ],
    'visits out of order': [
      (p) =>
        (p.periods.visits = [
          [1, 3],
          [2, 4],
        ]),
      visits,
    ],
    'a period in two visits': [
      (p) =>
        (p.periods.visits = [
          [1, 2],
          [2, 3, 4],
        ]),
      visits,
    ],
    'a period in no visit': [(p) => (p.periods.visits = [[1, 2, 3]]), visits],
    'empty visit': [(p) => p.periods.visits.push([]), ['/periods/visits/2', 'empty-visit']],
    'unreadable durations': [
      (p) => (p.periods.washout = { minimum: '30 min', maximum: 'P1M' }),
      ['/periods/washout/minimum', 'unreadable-duration'],
      ['/periods/washout/maximum', 'unreadable-duration'],
    ],
    'maximum washout below the minimum': [
      (p) => (p.periods.washout = { minimum: 'P1D', maximum: 'PT23H' }),
      ['/periods/washout', 'washout-maximum-below-minimum'],
    ],
    'no sites': [(p) => (p.sites = []), ['/sites', 'no-sites']],
    'site twice': [(p) => (p.sites[1]!.siteId = 'north'), ['/sites/1/siteId', 'duplicate-site']],
    'nobody to enrol': [
      (p) => (p.sites[0]!.targetEnrolment = 0),
      ['/sites/0/targetEnrolment', 'unusable-target-enrolment'],
    ],
  });
});

describe('faults of measures', () => {
  each({
    'none at all': [
      (p) => {
        p.measures = [];
        p.exclusions = [];
        p.analysis.measures = [];
      },
      [m, 'no-measures'],
      [a, 'no-primary-measure'],
    ],
    'key of a trial record': [
      (p) => {
        p.measures[5]!.key = 'period';
        p.exclusions.shift();
        p.analysis.measures[4]!.measure = 'period';
      },
      [`${m}/5/key`, 'reserved-key'],
    ],
    'half a decimal': [
      (p) => (p.measures[0]!.decimals = 0.5),
      [`${m}/0/decimals`, 'unusable-decimals'],
    ],
    'decimals of a yes or no': [
      (p) => (p.measures[3]!.decimals = 1),
      [`${m}/3/decimals`, 'decimals-on-binary'],
    ],
    'range of a yes or no': [
      (p) => (p.measures[3]!.validRange = { minimum: 0, maximum: 1 }),
      [`${m}/3/validRange`, 'range-on-binary'],
    ],
    'range upside down': [
      (p) => (p.measures[5]!.validRange = { minimum: 2, maximum: 1 }),
      [`${m}/5/validRange`, 'range-minimum-above-maximum'],
    ],
    'time that may be zero': [
      (p) => (p.measures[0]!.validRange = { minimum: 0, maximum: 60 }),
      [`${m}/0/validRange`, 'range-reaches-zero'],
    ],
    'ordinal without points': [
      (p) => (p.measures[4]!.points = null),
      [`${m}/4/points`, 'ordinal-without-points'],
    ],
    'points that repeat and descend': [
      (p) => {
        p.measures[4]!.points![1]!.value = 1;
        p.measures[4]!.points![2]!.value = 0;
      },
      [`${m}/4/points/1/value`, 'points-not-ascending'],
      [`${m}/4/points/2/value`, 'points-not-ascending'],
    ],
    'a point outside the range': [
      (p) => (p.measures[4]!.validRange = { minimum: 1, maximum: 2 }),
      [`${m}/4/validRange`, 'point-outside-range'],
    ],
    'points of a time': [
      (p) => (p.measures[0]!.points = []),
      [`${m}/0/points`, 'points-on-non-ordinal'],
    ],
    'exposure of a time': [
      (p) => (p.measures[0]!.exposure = { kind: 'constant', value: 1, unit: 'h' }),
      [`${m}/0/exposure`, 'exposure-on-non-count'],
    ],
    'exposure that is not positive': [
      (p) => (p.measures[2]!.exposure = { kind: 'constant', value: 0, unit: 'h' }),
      [`${m}/2/exposure/value`, 'exposure-not-positive'],
    ],
    'exposure that is missing': [
      (p) => (p.measures[2]!.exposure = { kind: 'measure', measure: 'lines' }),
      [`${m}/2/exposure/measure`, 'unknown-measure'],
    ],
    'exposure of itself': [
      (p) => (p.measures[2]!.exposure = { kind: 'measure', measure: 'words' }),
      [`${m}/2/exposure/measure`, 'exposure-of-itself'],
    ],
    'exposure that is a rating, and planned besides': [
      (p) => (p.measures[2]!.exposure = { kind: 'measure', measure: 'comfort' }),
      [`${m}/2/exposure/measure`, 'exposure-unsuited'],
    ],
    'exposure taken more often than its count': [
      (p) => (p.measures[1]!.taken = 'once-a-period'),
      [`${m}/1/exposure/measure`, 'exposure-taken-more-often'],
    ],
  });
});

describe('faults of exclusion rules', () => {
  each({
    'missing measures': [
      (p) => {
        p.exclusions = [
          { kind: 'range', measure: 'speed', minimum: 0, maximum: null },
          { kind: 'time-out', measure: 'speed', limit: 5 },
        ];
      },
      ['/exclusions/0/measure', 'unknown-measure'],
      ['/exclusions/1/measure', 'unknown-measure'],
    ],
    'empty and open range': [
      (p) => {
        p.exclusions = [
          { kind: 'range', measure: 'tilt', minimum: 5, maximum: -5 },
          { kind: 'range', measure: 'tilt', minimum: null, maximum: null },
        ];
      },
      ['/exclusions/0', 'empty-range'],
      ['/exclusions/1', 'open-range'],
    ],
    'time-out that is not positive, and of a rating': [
      (p) => {
        p.exclusions = [
          { kind: 'time-out', measure: 'reading-time', limit: 0 },
          { kind: 'time-out', measure: 'comfort', limit: 3 },
        ];
      },
      ['/exclusions/0/limit', 'time-out-not-positive'],
      ['/exclusions/1/measure', 'exclusion-unsuited-to-scale'],
    ],
    'range of a yes or no': [
      (p) => {
        p.exclusions = [{ kind: 'range', measure: 'finished', minimum: 0, maximum: 0 }];
      },
      ['/exclusions/0/measure', 'exclusion-unsuited-to-scale'],
    ],
    'more completed periods than there are': [
      (p) => {
        p.exclusions = [{ kind: 'incomplete-participant', minimumPeriods: 5 }];
      },
      ['/exclusions/0/minimumPeriods', 'unusable-minimum-periods'],
    ],
  });
});

describe('faults of the analysis plan', () => {
  each({
    'missing measure, and one without plan': [
      (p) => (p.analysis.measures[1]!.measure = 'mistakes'),
      [`${m}/1`, 'measure-without-plan'],
      [`${a}/1/measure`, 'unknown-measure'],
    ],
    'measure planned twice': [
      (p) => p.analysis.measures.push(p.analysis.measures[1]!),
      [`${a}/5/measure`, 'duplicate-plan'],
    ],
    'nothing primary': [
      (p) => (p.analysis.measures[0]!.role = 'secondary'),
      [a, 'no-primary-measure'],
    ],
    'reference that is not a condition': [
      (p) => (p.analysis.measures[0]!.contrasts = { kind: 'against-reference', reference: 'warm' }),
      [`${a}/0/contrasts/reference`, 'unknown-condition'],
    ],
    'alpha at its ends': [
      (p) => {
        p.analysis.measures[0]!.alpha = 0;
        p.analysis.measures[1]!.alpha = 1;
      },
      [`${a}/0/alpha`, 'alpha-out-of-range'],
      [`${a}/1/alpha`, 'alpha-out-of-range'],
    ],
    'ANOVA of a yes or no and of a rating': [
      (p) => {
        p.analysis.measures[2]!.method = 'repeated-measures-anova';
        p.analysis.measures[3]!.method = 'repeated-measures-anova';
      },
      [`${a}/2/method`, 'method-unsuited-to-scale'],
      [`${a}/3/method`, 'method-unsuited-to-scale'],
    ],
    'ranks adjusted for period': [
      (p) => (p.analysis.measures[1]!.primaryEstimate = 'adjusted-for-period'),
      [`${a}/1/primaryEstimate`, 'estimate-unsuited-to-method'],
    ],
    'equivalence by ranks': [
      (p) => (p.analysis.measures[1]!.equivalence = { lower: -1, upper: 1 }),
      [`${a}/1/equivalence`, 'equivalence-unsuited-to-method'],
    ],
    'margins that are not ratios, and not differences': [
      (p) => {
        p.analysis.measures[0]!.equivalence = { lower: -0.2, upper: 1.25 };
        p.analysis.measures[4]!.equivalence = { lower: 0.8, upper: 1.25 };
      },
      [`${a}/0/equivalence`, 'inconsistent-equivalence-margins'],
      [`${a}/4/equivalence`, 'inconsistent-equivalence-margins'],
    ],
  });

  it('names what suits instead', () => {
    const draft = validProtocol();
    draft.analysis.measures[3]!.method = 'repeated-measures-anova';
    expect(checkProtocol(draft)[0]?.message).toMatch(/friedman/);
  });
});

describe('several faults', () => {
  it('are all found at once, each pointing into the document', () => {
    const draft = validProtocol();
    draft.title = '';
    draft.periods.repetitions = -1;
    draft.sites = [];
    draft.measures[4]!.points = null;
    draft.analysis.measures[0]!.alpha = 5;
    const faults = checkProtocol(draft);
    expect(faults.map(({ code }) => code)).toEqual([
      'blank-title',
      'unusable-repetitions',
      'no-sites',
      'ordinal-without-points',
      'alpha-out-of-range',
    ]);
    for (const { pointer, message } of faults) {
      expect(message).not.toBe('');
      expect(at(draft, pointer)).toBeDefined();
    }
  });
});

/** What an RFC 6901 pointer points at. */
function at(document: unknown, pointer: string): unknown {
  let value = document;
  for (const token of pointer.split('/').slice(1)) {
    const name = token.replaceAll('~1', '/').replaceAll('~0', '~');
    value = typeof value === 'object' && value !== null ? Reflect.get(value, name) : undefined;
  }
  return value;
}
