import { describe, expect, it } from 'vitest';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import { schemeFaults } from '#core/protocol/check-scheme.ts';
import { type Draft, each } from './fault-cases.ts';
import { validProtocol } from './valid-protocol.ts';

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
    'may mirror a scheme': [
      (p) => {
        p.scheme = { kind: 'mirrored', base: 'williams' };
        p.periods.count = 8;
        p.periods.visits = [
          [1, 2, 3, 4],
          [5, 6, 7, 8],
        ];
      },
    ],
    'may nest one factor in the other': [
      (p) => {
        const base = 'williams';
        p.scheme = { kind: 'nested', blockedFactor: 2, blocks: base, insideBlocks: base };
      },
    ],
    'may constrain the orders': [
      (p) => {
        const constraints = [
          { kind: 'never-adjacent' as const, first: 'cold.open', second: 'warm.open' },
        ];
        p.scheme = { kind: 'constrained-permutations', constraints };
      },
    ],
    'may repeat the last condition': [
      (p) => {
        p.scheme = { kind: 'extra-period', base: 'orthogonal-latin-squares' };
        p.periods.count = 5;
        p.periods.visits = [[1, 2, 3, 4, 5]];
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
    'orthogonal squares of six conditions': [
      (p) => {
        p.withinFactors[0]!.levels = ['a', 'b', 'warm'].map((key) => ({ key, label: key }));
        p.periods.count = 6;
        p.periods.visits = [[1, 2, 3, 4, 5, 6]];
        p.scheme = { kind: 'orthogonal-latin-squares' };
      },
      ['/scheme', 'conditions-not-a-prime-power'],
    ],
    'mirrored and extra-period schemes over as many periods as conditions': [
      (p) => (p.scheme = { kind: 'mirrored', base: 'williams' }),
      ['/scheme', 'scheme-needs-other-periods'],
    ],
    'extra-period scheme on complete permutations of eight': [
      (p) => {
        eight(p);
        p.scheme = { kind: 'extra-period', base: 'complete-permutations' };
      },
      ['/scheme/base', 'too-many-conditions-for-scheme'],
      ['/scheme', 'scheme-needs-other-periods'],
    ],
    'design for two conditions with four of them': [
      (p) => (p.scheme = { kind: 'two-conditions', design: 'abb-baa' }),
      ['/scheme', 'scheme-needs-just-two-conditions'],
      ['/scheme/design', 'scheme-needs-other-periods'],
    ],
    'design for two conditions in which some participants meet one': [
      (p) => {
        p.withinFactors = p.withinFactors.slice(0, 1);
        p.periods.count = 2;
        p.periods.visits = [[1, 2]];
        p.exclusions.pop();
        p.scheme = { kind: 'two-conditions', design: 'aa-bb-ab-ba' };
        p.analysis.measures = p.analysis.measures.filter(({ measure }) => measure === 'finished');
        p.measures = p.measures.filter(({ key }) => key === 'finished');
        p.analysis.measures[0]!.role = 'primary';
        p.exclusions = [];
      },
      [`${a}/0/method`, 'method-needs-every-condition'],
    ],
    'more squares than there are': [
      (p) => (p.scheme = { kind: 'permutation-fraction', squares: 7 }),
      ['/scheme/squares', 'unusable-square-count'],
    ],
    'random orders without a usable count, seed and generator': [
      (p) => {
        const generator = { name: 'philox4x32-10', version: 2 };
        p.scheme = { kind: 'random-permutations', count: 0, seed: 'twelve', generator };
      },
      ['/scheme/count', 'unusable-sequence-count'],
      ['/scheme/seed', 'malformed-seed'],
      ['/scheme/generator', 'unknown-generator'],
    ],
    'constraints that name what is not there': [
      (p) => {
        const constraints = [
          { kind: 'never-in-periods' as const, condition: 'warm', periods: [0, 4, 5] },
          { kind: 'never-adjacent' as const, first: 'warm.open', second: 'warm.open' },
        ];
        p.scheme = { kind: 'constrained-permutations', constraints };
      },
      ['/scheme/constraints/0/condition', 'unknown-condition'],
      ['/scheme/constraints/0/periods/0', 'unknown-period'],
      ['/scheme/constraints/0/periods/2', 'unknown-period'],
      ['/scheme/constraints/1/second', 'condition-beside-itself'],
    ],
    'constraints that contradict each other': [
      (p) => {
        const constraints = [
          { kind: 'never-in-order' as const, first: 'cold.open', second: 'warm.open' },
          { kind: 'familiarisation-first' as const, condition: 'cold.shaded' },
          { kind: 'always-in-periods' as const, condition: 'cold.open', periods: [1] },
        ];
        p.scheme = { kind: 'constrained-permutations', constraints };
      },
      ['/scheme/constraints', 'contradictory-constraints'],
    ],
    'condition for familiarisation as the reference': [
      (p) => {
        const constraints = [{ kind: 'familiarisation-first' as const, condition: 'warm.open' }];
        p.scheme = { kind: 'constrained-permutations', constraints };
      },
      [`${a}/0/contrasts/reference`, 'reference-is-for-familiarisation'],
    ],
    'nothing to compare but a condition for familiarisation': [
      (p) => {
        p.withinFactors = p.withinFactors.slice(0, 1);
        p.periods.count = 2;
        p.periods.visits = [[1, 2]];
        p.exclusions = [];
        p.measures = p.measures.filter(({ key }) => key === 'tilt');
        p.analysis.measures = p.analysis.measures.filter(({ measure }) => measure === 'tilt');
        p.analysis.measures[0]!.role = 'primary';
        const constraints = [{ kind: 'familiarisation-first' as const, condition: 'warm' }];
        p.scheme = { kind: 'constrained-permutations', constraints };
      },
      [`${a}/0/contrasts`, 'nothing-to-compare'],
    ],
    'nested scheme with one factor': [
      (p) => {
        p.withinFactors = p.withinFactors.slice(0, 1);
        p.withinFactors[0]!.levels.push({ key: 'cool', label: 'cool' });
        p.periods.count = 3;
        p.periods.visits = [[1, 2, 3]];
        p.exclusions.pop();
        p.analysis.measures[0]!.contrasts = { kind: 'all-pairs' };
        const base = 'williams';
        p.scheme = { kind: 'nested', blockedFactor: 1, blocks: base, insideBlocks: base };
      },
      ['/scheme', 'scheme-needs-two-factors'],
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
        p.analysis.measures[0]!.primaryEstimate = 'unadjusted';
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

describe('the message of a scheme fault', () => {
  const keys = (count: number) => Array.from({ length: count }, (_, index) => `c${index}`);

  it.each([
    [{ kind: 'orthogonal-latin-squares' }, 6, 6, /the nearest are 5 and 7.*Williams/],
    [{ kind: 'mirrored', base: 'williams' }, 3, 3, /has 6 periods, but the protocol has 3/],
    [{ kind: 'extra-period', base: 'williams' }, 3, 3, /has 4 periods, but the protocol has 3/],
    [{ kind: 'two-conditions', design: 'ab-ba' }, 2, 3, /with 3: abb-baa, aba-bab, aab-bba/],
    [{ kind: 'two-conditions', design: 'ab-ba' }, 2, 5, /two conditions have 2, 3 or 4/],
    [
      { kind: 'permutation-fraction', squares: 13 },
      5,
      5,
      /Of 5 conditions there are 1 to 12 pairs of squares, not 13/,
    ],
    [{ kind: 'constrained-permutations', constraints: [] }, 8, 8, /More than 5040.*custom list/],
    [{ kind: 'constrained-permutations', constraints: [] }, 13, 13, /at most 12.*custom list/],
    [
      {
        kind: 'constrained-permutations',
        constraints: [
          { kind: 'never-in-order', first: 'c0', second: 'c1' },
          { kind: 'always-in-periods', condition: 'c0', periods: [1, 2] },
          { kind: 'always-in-periods', condition: 'c1', periods: [1, 2] },
          { kind: 'always-in-periods', condition: 'c2', periods: [2] },
        ],
      },
      3,
      3,
      /together: number 2, number 3, number 4; leave one of them out/,
    ],
  ] as const)('says what would work: %j', (scheme, count, periods, message) => {
    const faults = schemeFaults(scheme, keys(count), periods);
    expect(faults.map((fault) => fault.message).join()).toMatch(message);
  });
});
