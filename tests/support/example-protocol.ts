import type { ProtocolDocument } from '#server/studies/schemas.ts';

/**
 * The scenario of the demo: four glove liners for cold-store pickers, a pegboard task after a stay
 * in the cold room. Hands cool over the session and people get better at the pegboard, so order
 * matters for a real reason. A new copy each time.
 */
export function exampleProtocol(
  sites: readonly { readonly siteId: string; readonly targetEnrolment: number }[],
): ProtocolDocument {
  const level = (key: string, label: string) => ({ key, label });
  const unrated = { points: null, exposure: null };
  const planned = {
    role: 'secondary' as const,
    method: 'friedman' as const,
    primaryEstimate: 'unadjusted' as const,
    contrasts: { kind: 'all-pairs' as const },
    multiplicity: 'holm' as const,
    alpha: 0.05,
    equivalence: null,
  };
  return {
    title: 'Glove liners for picking in the cold store',
    rationale: 'Liners that keep hands warm may cost dexterity. Pickers need both.',
    hypotheses: [{ key: 'liners-differ', statement: 'Pegboard time differs between the liners.' }],
    withinFactors: [
      {
        key: 'liner',
        label: 'Glove liner',
        levels: [
          level('none', 'No liner'),
          level('silk', 'Silk'),
          level('merino', 'Merino'),
          level('fleece', 'Fleece'),
        ],
      },
    ],
    betweenFactors: [
      {
        key: 'shift',
        label: 'Shift',
        levels: [level('early', 'Early shift'), level('late', 'Late shift')],
      },
    ],
    scheme: { kind: 'williams' },
    policy: { kind: 'balanced' },
    replacement: { kind: 'same-site' },
    periods: {
      count: 4,
      repetitions: 3,
      visits: [
        [1, 2],
        [3, 4],
      ],
      washout: { minimum: 'PT20M', maximum: 'P14D' },
    },
    sites: sites.map(({ siteId, targetEnrolment }) => ({ siteId, targetEnrolment })),
    measures: [
      {
        key: 'pegboard-time',
        label: 'Pegboard time',
        unit: 's',
        scale: 'time-like',
        direction: 'lower-is-better',
        taken: 'each-trial',
        validRange: { minimum: 5, maximum: 60 },
        decimals: 1,
        ...unrated,
      },
      {
        key: 'pegs-dropped',
        label: 'Pegs dropped',
        unit: null,
        scale: 'count',
        direction: 'lower-is-better',
        taken: 'each-trial',
        validRange: { minimum: 0, maximum: 25 },
        decimals: 0,
        points: null,
        exposure: { kind: 'constant', value: 25, unit: 'pegs' },
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
        ...unrated,
      },
      {
        key: 'hand-comfort',
        label: 'Hand comfort',
        unit: null,
        scale: 'ordinal',
        direction: 'higher-is-better',
        taken: 'once-a-period',
        validRange: null,
        decimals: 0,
        points: [
          'painful',
          'very uncomfortable',
          'uncomfortable',
          'neither',
          'comfortable',
          'very comfortable',
          'as in a warm room',
        ].map((label, index) => ({ value: index + 1, label })),
        exposure: null,
      },
    ],
    exclusions: [
      { kind: 'time-out', measure: 'pegboard-time', limit: 60 },
      { kind: 'incomplete-participant', minimumPeriods: 4 },
    ],
    analysis: {
      measures: [
        {
          ...planned,
          measure: 'pegboard-time',
          role: 'primary',
          method: 'repeated-measures-anova',
          primaryEstimate: 'adjusted-for-period',
        },
        { ...planned, measure: 'pegs-dropped' },
        { ...planned, measure: 'part-misseated' },
        { ...planned, measure: 'hand-comfort' },
      ],
    },
  };
}
