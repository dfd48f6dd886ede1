import type { ProtocolDocument } from '@fairturn/client';
import { LINERS } from './truth.ts';

export const REPETITIONS = 3;

/** The registered plan of the demo: four glove liners for cold-store pickers, at three sites. */
export function linerProtocol(sites: ProtocolDocument['sites']): ProtocolDocument {
  return {
    title: 'Glove liners for pickers in the cold store (invented data)',
    rationale:
      'Pickers work in thin gloves at −22 °C. A liner keeps hands warm and may cost dexterity. ' +
      'Order matters: hands cool over the session, and people get better at the pegboard.',
    hypotheses: [
      { key: 'liner-time', statement: 'Pegboard time differs between the four liners.' },
      { key: 'fleece-slower', statement: 'Fleece is slower than silk.' },
    ],
    withinFactors: [
      {
        key: 'liner',
        label: 'Liner',
        levels: LINERS.map(({ key, label }) => ({ key, label })),
      },
    ],
    betweenFactors: [],
    scheme: { kind: 'williams' },
    policy: { kind: 'balanced' },
    replacement: { kind: 'same-site' },
    // A real study rests between periods; the demo's hands need no warming.
    periods: {
      count: 4,
      repetitions: REPETITIONS,
      visits: [[1, 2, 3, 4]],
      washout: { minimum: 'PT0S', maximum: 'PT4H' },
    },
    sites,
    measures: measures(),
    exclusions: [
      { kind: 'time-out', measure: 'pegboard-time', limit: 120 },
      { kind: 'incomplete-participant', minimumPeriods: 4 },
    ],
    analysis: {
      measures: [
        planOf('pegboard-time', 'primary', 'repeated-measures-anova'),
        planOf('pegs-dropped', 'secondary', 'repeated-measures-anova'),
        planOf('part-misseated', 'secondary', 'friedman'),
        planOf('hand-comfort', 'secondary', 'friedman'),
      ],
    },
  };
}

type MeasurePlan = ProtocolDocument['analysis']['measures'][number];

function planOf(
  measure: string,
  role: MeasurePlan['role'],
  method: MeasurePlan['method'],
): MeasurePlan {
  return {
    measure,
    role,
    method,
    primaryEstimate: method === 'friedman' ? 'unadjusted' : 'adjusted-for-period',
    contrasts: { kind: 'against-reference', reference: 'silk' },
    multiplicity: 'holm',
    alpha: 0.05,
    equivalence: null,
  };
}

function measures(): ProtocolDocument['measures'] {
  return [
    {
      key: 'pegboard-time',
      label: 'Pegboard time',
      unit: 's',
      scale: 'time-like',
      direction: 'lower-is-better',
      taken: 'each-trial',
      validRange: { minimum: 5, maximum: 120 },
      decimals: 1,
      points: null,
      exposure: null,
    },
    {
      key: 'pegs-dropped',
      label: 'Pegs dropped of 25',
      unit: null,
      scale: 'count',
      direction: 'lower-is-better',
      taken: 'each-trial',
      validRange: { minimum: 0, maximum: 25 },
      decimals: 2,
      points: null,
      exposure: null,
    },
    {
      key: 'part-misseated',
      label: 'A part mis-seated',
      unit: null,
      scale: 'binary',
      direction: 'lower-is-better',
      taken: 'each-trial',
      validRange: null,
      decimals: 0,
      points: null,
      exposure: null,
    },
    {
      key: 'hand-comfort',
      label: 'Hand comfort',
      unit: null,
      scale: 'ordinal',
      direction: 'higher-is-better',
      taken: 'once-a-period',
      validRange: { minimum: 1, maximum: 7 },
      decimals: 1,
      points: [
        'numb',
        'painfully cold',
        'cold',
        'cool',
        'neither warm nor cool',
        'warm',
        'pleasantly warm',
      ].map((label, index) => ({ value: index + 1, label })),
      exposure: null,
    },
  ];
}
