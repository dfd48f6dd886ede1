import type { AnalysisData, OutsideProtocol } from './analysis-data.ts';
import type { Snapshot, SnapshotParticipant } from './snapshot.ts';

/** Who came, how far they got, and what differed from the protocol. */
export interface ParticipantFlow {
  readonly overall: FlowCounts;
  /** In the order of site ids; every site of the snapshot, also one where nobody came. */
  readonly bySite: readonly {
    readonly siteId: string;
    readonly label: string;
    readonly targetEnrolment: number;
    readonly counts: FlowCounts;
  }[];
  readonly byProtocolVersion: readonly { readonly version: number; readonly arrived: number }[];
  readonly outsideProtocol: OutsideProtocol;
}

export interface FlowCounts {
  /** Check-ins that stand: voided ones are not among them. */
  readonly arrived: number;
  /** Every period of the sequence completed, and not withdrawn. */
  readonly completed: number;
  /** Neither completed nor withdrawn when the snapshot was frozen. */
  readonly underWay: number;
  readonly withdrawn: number;
  readonly withdrawals: readonly Withdrawals[];
  /** Withdrawn participants whose slot somebody else took over. */
  readonly replaced: number;
  readonly voided: number;
  /** Left out entirely by an exclusion rule on participants. */
  readonly excluded: number;
  /** Content erased before the snapshot was frozen. */
  readonly erased: number;
  readonly deviations: readonly DeviationCount[];
}

/** Withdrawals by coded reason and the period reached. */
export interface Withdrawals {
  readonly reasonCode: string;
  readonly periodReached: number;
  readonly participants: number;
}

/** How often one kind of protocol deviation happened, and to how many participants. */
export interface DeviationCount {
  /**
   * `condition-presented-differs`, counted by trial, or a kind recorded at the start of a period,
   * counted by period.
   */
  readonly kind: string;
  readonly occurrences: number;
  readonly participants: number;
}

/** The kind under which trials of another condition than the assigned one are counted. */
export const CONDITION_DIFFERS = 'condition-presented-differs';

/**
 * Counts the flow of participants through the study.
 *
 * @param excludedParticipants ids left out by an exclusion rule on participants
 */
export function participantFlow(
  snapshot: Snapshot,
  data: AnalysisData,
  excludedParticipants: ReadonlySet<string>,
): ParticipantFlow {
  const participants = data.participants.map(({ frame }) => frame);
  const replaced = replacedParticipants(participants);
  const count = (of: readonly SnapshotParticipant[]): FlowCounts =>
    flowCounts(of, replaced, excludedParticipants);
  const arrived = participants.filter(isNotVoid);
  const versions = [...new Set(arrived.map(({ protocolVersion }) => protocolVersion))];
  return {
    overall: count(participants),
    bySite: snapshot.sites
      .toSorted((a, b) => (a.siteId < b.siteId ? -1 : 1))
      .map(({ siteId, label, targetEnrolment }) => ({
        siteId,
        label,
        targetEnrolment,
        counts: count(participants.filter((participant) => participant.siteId === siteId)),
      })),
    byProtocolVersion: versions
      .sort((a, b) => a - b)
      .map((version) => ({
        version,
        arrived: arrived.filter(({ protocolVersion }) => protocolVersion === version).length,
      })),
    outsideProtocol: data.outsideProtocol,
  };
}

/** True when a participant completed every period of the sequence and did not withdraw. */
export function hasCompleted(participant: SnapshotParticipant): boolean {
  return (
    participant.ending === null && completedPeriods(participant) >= participant.sequence.length
  );
}

/** Periods completed. */
export function completedPeriods({ periods }: SnapshotParticipant): number {
  return periods.filter(({ completedAt }) => completedAt !== null).length;
}

function isNotVoid({ ending }: SnapshotParticipant): boolean {
  return ending?.kind !== 'void';
}

/** Withdrawn participants with a later, standing occupant of the same slot of the same site. */
function replacedParticipants(ordered: readonly SnapshotParticipant[]): ReadonlySet<string> {
  const slotOf = ({ siteId, slotNumber }: SnapshotParticipant) => `${siteId} ${slotNumber}`;
  const bySlot = Map.groupBy(ordered.filter(isNotVoid), slotOf);
  const replaced = new Set<string>();
  for (const occupants of bySlot.values()) {
    // In canonical order, the occupants of one slot stand in the order of arrival.
    for (const { id, ending } of occupants.slice(0, -1)) {
      if (ending?.kind === 'withdrawn') replaced.add(id);
    }
  }
  return replaced;
}

function flowCounts(
  participants: readonly SnapshotParticipant[],
  replaced: ReadonlySet<string>,
  excluded: ReadonlySet<string>,
): FlowCounts {
  const arrived = participants.filter(isNotVoid);
  const completed = arrived.filter(hasCompleted).length;
  const withdrawn = arrived.filter(({ ending }) => ending?.kind === 'withdrawn').length;
  return {
    arrived: arrived.length,
    completed,
    underWay: arrived.length - completed - withdrawn,
    withdrawn,
    withdrawals: withdrawals(arrived),
    replaced: arrived.filter(({ id }) => replaced.has(id)).length,
    voided: participants.length - arrived.length,
    excluded: arrived.filter(({ id }) => excluded.has(id)).length,
    erased: arrived.filter(({ content }) => content === null).length,
    deviations: deviations(arrived),
  };
}

function withdrawals(participants: readonly SnapshotParticipant[]): Withdrawals[] {
  const found = new Map<string, Withdrawals>();
  for (const { ending } of participants) {
    if (ending?.kind !== 'withdrawn') continue;
    const { reasonCode, periodReached } = ending;
    const key = `${reasonCode} ${periodReached}`;
    const sofar = found.get(key)?.participants ?? 0;
    found.set(key, { reasonCode, periodReached, participants: sofar + 1 });
  }
  return [...found.values()].sort(
    (a, b) => compareKeys(a.reasonCode, b.reasonCode) || a.periodReached - b.periodReached,
  );
}

function deviations(participants: readonly SnapshotParticipant[]): DeviationCount[] {
  const found = new Map<string, { occurrences: number; participants: Set<string> }>();
  const add = (kind: string, participantId: string): void => {
    const entry = found.get(kind) ?? { occurrences: 0, participants: new Set<string>() };
    entry.occurrences += 1;
    entry.participants.add(participantId);
    found.set(kind, entry);
  };
  for (const { id, periods, content } of participants) {
    for (const period of periods) for (const kind of period.deviations) add(kind, id);
    for (const trial of content?.trials ?? []) if (trial.deviation) add(CONDITION_DIFFERS, id);
  }
  return [...found]
    .map(([kind, entry]) => ({
      kind,
      occurrences: entry.occurrences,
      participants: entry.participants.size,
    }))
    .sort((a, b) => compareKeys(a.kind, b.kind));
}

function compareKeys(a: string, b: string): number {
  return a < b ? -1 : a > b ? 1 : 0;
}
