import { describe, expect, it } from 'vitest';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import { each } from './fault-cases.ts';
import { validProtocol } from './valid-protocol.ts';

const m = '/measures';
const a = '/analysis/measures';

// common practice, no source: what may be registered is the project's own rule, stated in the
// docstrings; pointers are RFC 6901
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
    'equivalence at an alpha that leaves no interval': [
      (p) => {
        p.analysis.measures[0]!.equivalence = { lower: 0.8, upper: 1.25 };
        p.analysis.measures[0]!.alpha = 0.5;
      },
      [`${a}/0/equivalence`, 'alpha-too-large-for-equivalence'],
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
