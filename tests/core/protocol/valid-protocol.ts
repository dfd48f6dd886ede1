import type { Measure, MeasurePlan, Protocol } from '#core/protocol/protocol.ts';

/** The same type with everything in it open to change, for tests that spoil a valid protocol. */
export type Mutable<T> = T extends object ? { -readonly [K in keyof T]: Mutable<T[K]> } : T;

function measure(changes: Partial<Measure> & Pick<Measure, 'key' | 'scale'>): Measure {
  return {
    label: changes.key,
    unit: null,
    direction: 'neither',
    taken: 'each-trial',
    validRange: null,
    decimals: 0,
    points: null,
    exposure: null,
    ...changes,
  };
}

function plan(changes: Partial<MeasurePlan> & Pick<MeasurePlan, 'measure'>): MeasurePlan {
  return {
    role: 'secondary',
    method: 'friedman',
    primaryEstimate: 'unadjusted',
    contrasts: { kind: 'all-pairs' },
    multiplicity: 'holm',
    alpha: 0.05,
    equivalence: null,
    ...changes,
  };
}

/** A protocol without a fault, a new copy each time: four lamps, one measure of every scale. */
export function validProtocol(): Mutable<Protocol> {
  const protocol: Protocol = {
    title: 'Reading under four lamps',
    rationale: 'Glare may slow reading.',
    hypotheses: [{ key: 'glare-slows', statement: 'Glare slows reading.' }],
    withinFactors: [
      { key: 'lamp', label: 'Lamp', levels: [level('warm'), level('cold')] },
      { key: 'shade', label: 'Shade', levels: [level('open'), level('shaded')] },
    ],
    betweenFactors: [{ key: 'age', label: 'Age', levels: [level('young'), level('old')] }],
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
      washout: { minimum: 'PT30M', maximum: 'P14D' },
    },
    sites: [
      { siteId: 'north', targetEnrolment: 12 },
      { siteId: 'south', targetEnrolment: 8 },
    ],
    measures: [
      measure({
        key: 'reading-time',
        scale: 'time-like',
        unit: 's',
        validRange: { minimum: 1, maximum: 60 },
      }),
      measure({ key: 'errors', scale: 'count', exposure: { kind: 'measure', measure: 'words' } }),
      measure({ key: 'words', scale: 'count' }),
      measure({ key: 'finished', scale: 'binary' }),
      measure({
        key: 'comfort',
        scale: 'ordinal',
        taken: 'once-a-period',
        points: [
          { value: 1, label: 'poor' },
          { value: 2, label: 'fair' },
          { value: 3, label: 'good' },
        ],
      }),
      measure({ key: 'tilt', scale: 'continuous', validRange: { minimum: -30, maximum: 30 } }),
    ],
    exclusions: [
      { kind: 'range', measure: 'tilt', minimum: -45, maximum: null },
      { kind: 'time-out', measure: 'reading-time', limit: 60 },
      { kind: 'incomplete-participant', minimumPeriods: 4 },
    ],
    analysis: {
      measures: [
        plan({
          measure: 'reading-time',
          role: 'primary',
          method: 'repeated-measures-anova',
          primaryEstimate: 'adjusted-for-period',
          contrasts: { kind: 'against-reference', reference: 'warm.open' },
          equivalence: { lower: 0.8, upper: 1.25 },
        }),
        plan({ measure: 'errors' }),
        plan({ measure: 'finished' }),
        plan({ measure: 'comfort' }),
        plan({
          measure: 'tilt',
          method: 'repeated-measures-anova',
          equivalence: { lower: -2, upper: 2 },
        }),
      ],
    },
  };
  // Through JSON and back, so that no two tests share a part of it.
  return JSON.parse(JSON.stringify(protocol));
}

function level(key: string): { key: string; label: string } {
  return { key, label: key };
}
