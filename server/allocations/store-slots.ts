import type { SqlTransaction } from '#platform/database.ts';

/** Where a new participant is to be put. */
export interface Cell {
  readonly studyId: string;
  readonly protocolVersion: number;
  readonly siteId: string;
  readonly stratum: string;
}

export interface VacantSlot {
  readonly id: string;
  readonly number: number;
  readonly issueNumber: number;
  readonly sequenceIndex: number;
  /** When the occupant before arrived. */
  readonly occupiedAt: Date;
  /** Somebody withdrew from it, at whatever time. */
  readonly withdrawn: boolean;
}

export async function selectCodeExists(
  tx: SqlTransaction,
  studyId: string,
  codeKey: string,
): Promise<boolean> {
  const rows = await tx`
    select 1 from participant_codes where study_id = ${studyId} and code_key = ${codeKey}`;
  return rows.length > 0;
}

/**
 * The vacated slot that the next arrival of a cell takes, if there is one: of a voided check-in
 * before one of a withdrawal, then the lowest number.
 */
export async function selectVacantSlot(
  tx: SqlTransaction,
  cell: Cell,
  replacesWithdrawn: boolean,
): Promise<VacantSlot | null> {
  const rows = await tx<VacantSlot[]>`
    select s.id, s.number, s.issue_number as "issueNumber", s.sequence_index as "sequenceIndex",
      latest.occupied_at as "occupiedAt",
      exists (select 1 from occupancies w
        where w.slot_id = s.id and w.ending = 'withdrawn') as withdrawn
    from slots s
    join lateral (select o.occupied_at, o.ending from occupancies o where o.slot_id = s.id
      order by o.occupied_at desc limit 1) latest on true
    where s.study_id = ${cell.studyId} and s.site_id = ${cell.siteId}
      and s.protocol_version = ${cell.protocolVersion} and s.stratum = ${cell.stratum}
      and (latest.ending = 'void' or (latest.ending = 'withdrawn' and ${replacesWithdrawn}))
    order by latest.ending = 'void' desc, s.number limit 1`;
  return rows[0] ?? null;
}

/**
 * Vacated slots of earlier protocol versions at a site: nobody takes them any more, so they do not
 * count towards its target.
 */
export async function countLapsedSlots(
  tx: SqlTransaction,
  cell: Cell,
  replacesWithdrawn: boolean,
): Promise<number> {
  const rows = await tx<{ count: number }[]>`
    select count(*)::int as count from slots s
    join lateral (select o.ending from occupancies o where o.slot_id = s.id
      order by o.occupied_at desc limit 1) latest on true
    where s.study_id = ${cell.studyId} and s.site_id = ${cell.siteId}
      and s.protocol_version < ${cell.protocolVersion}
      and (latest.ending = 'void' or (latest.ending = 'withdrawn' and ${replacesWithdrawn}))`;
  return rows[0]?.count ?? 0;
}

export interface SequenceCountRow {
  readonly siteId: string;
  readonly stratum: string;
  readonly sequenceIndex: number;
  readonly issued: number;
}

/** Issued slots of one protocol version by site, stratum and sequence. */
export async function selectSequenceCounts(
  tx: SqlTransaction,
  studyId: string,
  protocolVersion: number,
): Promise<SequenceCountRow[]> {
  return await tx<SequenceCountRow[]>`
    select site_id as "siteId", stratum, sequence_index as "sequenceIndex", issued
    from sequence_counts where study_id = ${studyId} and protocol_version = ${protocolVersion}
    order by site_id, stratum, sequence_index`;
}

export interface NewSlot extends Cell {
  readonly id: string;
  readonly number: number;
  readonly issueNumber: number;
  readonly sequenceIndex: number;
  readonly draws: number;
  readonly issuedAt: Date;
}

/** The slot, and its count in the cell. */
export async function insertSlot(tx: SqlTransaction, slot: NewSlot): Promise<void> {
  const { studyId, protocolVersion, siteId, stratum, sequenceIndex } = slot;
  await tx`
    with slot as (
      insert into slots (id, study_id, site_id, protocol_version, stratum, number, issue_number,
        sequence_index, draws, issued_at)
      values (${slot.id}, ${studyId}, ${siteId}, ${protocolVersion}, ${stratum}, ${slot.number},
        ${slot.issueNumber}, ${sequenceIndex}, ${slot.draws}, ${slot.issuedAt}))
    insert into sequence_counts
      (study_id, protocol_version, site_id, stratum, sequence_index, issued)
    values (${studyId}, ${protocolVersion}, ${siteId}, ${stratum}, ${sequenceIndex}, 1)
    on conflict (study_id, protocol_version, site_id, stratum, sequence_index)
      do update set issued = sequence_counts.issued + 1`;
}

export interface NewParticipant {
  readonly id: string;
  readonly studyId: string;
  readonly siteId: string;
  readonly stratum: string;
  readonly code: string;
  readonly codeKey: string;
  readonly arrivedAt: Date;
  readonly slotId: string;
  readonly stationId: string | null;
  readonly operator: string | null;
}

/** The participant, the code in its erasable row, and the occupancy of the slot. */
export async function insertParticipant(
  tx: SqlTransaction,
  participant: NewParticipant,
): Promise<void> {
  const { id, studyId, siteId, stratum, code, codeKey, arrivedAt } = participant;
  await tx`
    with participant as (
      insert into participants (id, study_id, site_id, stratum, arrived_at)
      values (${id}, ${studyId}, ${siteId}, ${stratum}, ${arrivedAt})),
    code as (
      insert into participant_codes (participant_id, study_id, code, code_key)
      values (${id}, ${studyId}, ${code}, ${codeKey}))
    insert into occupancies (participant_id, slot_id, occupied_at, station_id, operator)
    values (${id}, ${participant.slotId}, ${arrivedAt}, ${participant.stationId},
      ${participant.operator})`;
}

export interface SlotRow {
  readonly issueNumber: number;
  readonly siteId: string;
  readonly slotNumber: number;
  readonly protocolVersion: number;
  readonly stratum: string;
  readonly sequenceIndex: number;
  readonly drawsUsed: number;
}

export async function selectSlots(tx: SqlTransaction, studyId: string): Promise<SlotRow[]> {
  return await tx<SlotRow[]>`
    select issue_number as "issueNumber", site_id as "siteId", number as "slotNumber",
      protocol_version as "protocolVersion", stratum, sequence_index as "sequenceIndex",
      draws as "drawsUsed"
    from slots where study_id = ${studyId} order by issue_number`;
}

/** Participants who completed every period, by site, stratum and sequence; no voided check-in. */
export async function selectCompletedCounts(
  tx: SqlTransaction,
  studyId: string,
  protocolVersion: number,
  periods: number,
): Promise<SequenceCountRow[]> {
  return await tx<SequenceCountRow[]>`
    select s.site_id as "siteId", s.stratum, s.sequence_index as "sequenceIndex",
      count(*)::int as issued
    from slots s join occupancies o on o.slot_id = s.id
    where s.study_id = ${studyId} and s.protocol_version = ${protocolVersion}
      and o.ending is distinct from 'void'
      and (select count(*) from participant_periods q
        where q.participant_id = o.participant_id and q.completed_at is not null) = ${periods}
    group by 1, 2, 3`;
}

export interface CompletedPeriodRow {
  readonly sequenceIndex: number;
  readonly period: number;
  /** Participants of the sequence who completed this period. */
  readonly completed: number;
  /** … and the period before it too. */
  readonly pairs: number;
}

export async function selectCompletedPeriods(
  tx: SqlTransaction,
  studyId: string,
  protocolVersion: number,
): Promise<CompletedPeriodRow[]> {
  return await tx<CompletedPeriodRow[]>`
    select s.sequence_index as "sequenceIndex", q.period, count(*)::int as completed,
      count(b.completed_at)::int as pairs
    from slots s
    join occupancies o on o.slot_id = s.id
    join participant_periods q on q.participant_id = o.participant_id
    left join participant_periods b on b.participant_id = q.participant_id
      and b.period = q.period - 1
    where s.study_id = ${studyId} and s.protocol_version = ${protocolVersion}
      and o.ending is distinct from 'void' and q.completed_at is not null
    group by 1, 2`;
}
