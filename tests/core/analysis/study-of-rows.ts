import type { Snapshot, SnapshotParticipant, SnapshotTrial } from '#core/analysis/snapshot.ts';
import type { Factor, Measure, MeasurePlan, Protocol } from '#core/protocol/protocol.ts';

/** One trial of a test's data. */
export interface Row {
  readonly participant: string;
  readonly condition: string;
  readonly period: number;
  readonly repetition?: number;
  readonly site?: string;
  readonly stratum?: string;
  readonly values: SnapshotTrial['values'];
  readonly missing?: SnapshotTrial['missing'];
}

/** A measure with everything open at its plainest. */
export function measureOf(changes: Partial<Measure> & Pick<Measure, 'key'>): Measure {
  return {
    label: changes.key,
    unit: null,
    scale: 'continuous',
    direction: 'neither',
    taken: 'each-trial',
    validRange: null,
    decimals: 1,
    points: null,
    exposure: null,
    ...changes,
  };
}

/** A plan at its plainest. */
export function planOf(changes: Partial<MeasurePlan> & Pick<MeasurePlan, 'measure'>): MeasurePlan {
  return {
    role: 'primary',
    method: 'repeated-measures-anova',
    primaryEstimate: 'adjusted-for-period',
    contrasts: { kind: 'all-pairs' },
    multiplicity: 'holm',
    alpha: 0.05,
    equivalence: null,
    ...changes,
  };
}

/** A factor whose labels are its keys in capitals. */
export function factorOf(key: string, levelKeys: readonly string[]): Factor {
  const levels = levelKeys.map((level) => ({ key: level, label: level.toUpperCase() }));
  return { key, label: key.toUpperCase(), levels };
}

/** A protocol around measures and plans: one within factor `tool` of so many levels, one site. */
export function protocolOf(
  changes: Partial<Protocol> & Pick<Protocol, 'measures' | 'withinFactors'>,
): Protocol {
  const conditions = changes.withinFactors.reduce((count, { levels }) => count * levels.length, 1);
  return {
    title: 'A study for a test',
    rationale: 'To see whether the analysis is right.',
    hypotheses: [{ key: 'differ', statement: 'The conditions differ.' }],
    betweenFactors: [],
    scheme: { kind: 'cyclic-latin-square' },
    policy: { kind: 'balanced' },
    replacement: { kind: 'same-site' },
    periods: {
      count: conditions,
      repetitions: 1,
      visits: [Array.from({ length: conditions }, (_, index) => index + 1)],
      washout: { minimum: 'PT0S', maximum: null },
    },
    sites: [{ siteId: 'site-1', targetEnrolment: 40 }],
    exclusions: [],
    analysis: { measures: changes.measures.map(({ key }) => planOf({ measure: key })) },
    ...changes,
  };
}

/** A participant who arrived, did every period of the sequence and has these trials. */
export function participantOf(
  changes: Partial<SnapshotParticipant> & Pick<SnapshotParticipant, 'id'>,
  trials: readonly (Partial<SnapshotTrial> & Pick<SnapshotTrial, 'condition' | 'values'>)[] = [],
): SnapshotParticipant {
  const sequence = changes.sequence ?? [...new Set(trials.map(({ condition }) => condition))];
  return {
    siteId: 'site-1',
    stratum: 'all',
    protocolVersion: 1,
    slotNumber: 1,
    sequence,
    arrivedAt: '2026-01-05T09:00:00.000Z',
    ending: null,
    periods: sequence.map((_, index) => ({
      period: index + 1,
      startedAt: '2026-01-05T09:00:00.000Z',
      completedAt: '2026-01-05T10:00:00.000Z',
      deviations: [],
    })),
    contentCommitment: null,
    content: {
      participantId: changes.id,
      trials: trials.map((trial, index) => ({
        period: index + 1,
        repetition: 1,
        deviation: false,
        flags: [],
        missing: {},
        startedAt: null,
        endedAt: null,
        ...trial,
      })),
    },
    ...changes,
  };
}

/** A snapshot of these participants, of a study that is closed. */
export function snapshotOf(participants: readonly SnapshotParticipant[]): Snapshot {
  const sites = [...new Set(['site-1', ...participants.map(({ siteId }) => siteId)])];
  return {
    studyId: '01970000-0000-7000-8000-000000000001',
    enrolment: 'closed',
    protocolVersions: [{ number: 1, sha256: 'a'.repeat(64) }],
    sites: sites.map((siteId) => ({ siteId, label: `Site ${siteId}`, targetEnrolment: 40 })),
    looks: [{ kind: 'analysis', duringEnrolment: false, count: 1 }],
    participants,
  };
}

/** A snapshot of long rows, slots numbered in the order of first appearance. */
export function snapshotOfRows(rows: readonly Row[]): Snapshot {
  const byParticipant = Map.groupBy(rows, ({ participant }) => participant);
  return snapshotOf(
    [...byParticipant].map(([id, own], index) =>
      participantOf(
        {
          id,
          siteId: own[0]?.site ?? 'site-1',
          stratum: own[0]?.stratum ?? 'all',
          slotNumber: index + 1,
          sequence: own
            .filter(({ repetition = 1 }) => repetition === 1)
            .toSorted((a, b) => a.period - b.period)
            .map(({ condition }) => condition),
        },
        own.map(({ condition, period, repetition = 1, values, missing = {} }) => ({
          condition,
          period,
          repetition,
          values,
          missing,
        })),
      ),
    ),
  );
}
