import type { SnapshotTrial } from '#core/analysis/snapshot.ts';
import type { Protocol } from '#core/protocol/protocol.ts';
import { factorOf, measureOf, planOf, protocolOf } from './study-of-rows.ts';

/** A protocol with a measure of every scale, each by a method that suits it; three conditions. */
export function mixedProtocol(): Protocol {
  return protocolOf({
    withinFactors: [factorOf('glove', ['bare', 'thin', 'thick'])],
    measures: [
      measureOf({ key: 'time', label: 'Task time', unit: 's', scale: 'time-like' }),
      measureOf({ key: 'force', label: 'Grip force', unit: 'N' }),
      measureOf({
        key: 'drops',
        label: 'Drops',
        scale: 'count',
        decimals: 0,
        exposure: { kind: 'measure', measure: 'pegs' },
      }),
      measureOf({ key: 'pegs', label: 'Pegs tried', scale: 'count', decimals: 0 }),
      measureOf({ key: 'seated', label: 'Seated right', scale: 'binary', decimals: 0 }),
      measureOf({
        key: 'comfort',
        label: 'Comfort',
        scale: 'ordinal',
        decimals: 0,
        taken: 'once-a-period',
        points: ['poor', 'fair', 'good'].map((label, index) => ({ value: index + 1, label })),
      }),
    ],
    exclusions: [
      { kind: 'time-out', measure: 'time', limit: 90 },
      { kind: 'incomplete-participant', minimumPeriods: 2 },
    ],
    analysis: {
      measures: [
        planOf({ measure: 'time', equivalence: { lower: 0.8, upper: 1.25 } }),
        planOf({
          measure: 'force',
          role: 'secondary',
          primaryEstimate: 'unadjusted',
          contrasts: { kind: 'against-reference', reference: 'bare' },
          equivalence: { lower: -5, upper: 5 },
        }),
        planOf({ measure: 'drops', role: 'secondary', multiplicity: 'bonferroni' }),
        ...['seated', 'comfort'].map((measure) =>
          planOf({
            measure,
            role: 'secondary',
            method: 'friedman',
            primaryEstimate: 'unadjusted',
            multiplicity: 'none',
          }),
        ),
      ],
    },
  });
}

/** Values of one trial that vary with person, condition and period, by a fixed rule. */
export function mixedValues(
  person: number,
  condition: number,
  period: number,
): SnapshotTrial['values'] {
  const noise =
    ((person * person * 37 + person * condition * 11 + period * condition * 23) % 17) / 17;
  const seven = (5 * person ** 2 + 3 * person * condition + (period + 1) * condition) % 7;
  return {
    time: 20 + 3 * condition - period + 4 * noise + (person % 5),
    force: 60 - 4 * condition + 6 * noise,
    drops: Math.round(9 * noise) + condition,
    pegs: 25,
    seated: seven > 2,
    comfort: 1 + Math.floor((3 * seven) / 7),
  };
}
