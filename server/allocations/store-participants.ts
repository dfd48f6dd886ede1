import type { SqlTransaction } from '#platform/database.ts';

/** A participant with the slot held, whether still or formerly. */
export interface ParticipantRow {
  readonly id: string;
  readonly code: string | null;
  readonly siteId: string;
  readonly stratum: string;
  readonly arrivedAt: Date;
  readonly erasedAt: Date | null;
  readonly slotNumber: number;
  readonly protocolVersion: number;
  readonly sequenceIndex: number;
  /** Somebody withdrew from the slot before. */
  readonly replacement: boolean;
  readonly endedAt: Date | null;
  readonly ending: 'withdrawn' | 'void' | null;
  readonly reasonCode: string | null;
  readonly periodReached: number | null;
}

export interface PeriodRow {
  readonly participantId: string;
  readonly period: number;
  readonly startedAt: Date | null;
  readonly completedAt: Date | null;
  readonly deviations: string[];
}

/** Everything but the conditions of a query for participants. */
function participantColumns(tx: SqlTransaction) {
  return tx`
    p.id, c.code, p.site_id as "siteId", p.stratum, p.arrived_at as "arrivedAt",
    p.erased_at as "erasedAt", s.number as "slotNumber", s.protocol_version as "protocolVersion",
    s.sequence_index as "sequenceIndex", o.ended_at as "endedAt", o.ending,
    o.reason_code as "reasonCode", o.period_reached as "periodReached",
    exists (select 1 from occupancies w where w.slot_id = o.slot_id
      and w.ending = 'withdrawn' and w.occupied_at < o.occupied_at) as replacement
    from participants p
    join occupancies o on o.participant_id = p.id
    join slots s on s.id = o.slot_id
    left join participant_codes c on c.participant_id = p.id`;
}

/** One participant of a study by id or by code; with `lock`, held until the transaction ends. */
export async function selectParticipant(
  tx: SqlTransaction,
  studyId: string,
  by: { readonly id: string } | { readonly codeKey: string },
  how: 'read' | 'lock',
): Promise<ParticipantRow | null> {
  const named = 'id' in by ? tx`p.id = ${by.id}` : tx`c.code_key = ${by.codeKey}`;
  const lock = how === 'lock' ? tx`for no key update of o` : tx``;
  const rows = await tx<ParticipantRow[]>`
    select ${participantColumns(tx)} where p.study_id = ${studyId} and ${named} ${lock}`;
  return rows[0] ?? null;
}

/** Participants in the order of their ids, which is that of arrival. */
export async function selectParticipants(
  tx: SqlTransaction,
  filter: {
    readonly studyId: string;
    readonly siteId: string | null;
    readonly after: string | null;
    readonly limit: number | null;
  },
): Promise<ParticipantRow[]> {
  const { studyId, siteId, after, limit } = filter;
  return await tx<ParticipantRow[]>`
    select ${participantColumns(tx)}
    where p.study_id = ${studyId}
      and (${siteId}::uuid is null or p.site_id = ${siteId}::uuid)
      and (${after}::uuid is null or p.id > ${after}::uuid)
    order by p.id limit ${limit}`;
}

export async function selectParticipantsByCode(
  tx: SqlTransaction,
  studyId: string,
  codeKeys: readonly string[],
): Promise<(ParticipantRow & { codeKey: string })[]> {
  return await tx<(ParticipantRow & { codeKey: string })[]>`
    select c.code_key as "codeKey", ${participantColumns(tx)}
    where c.study_id = ${studyId} and c.code_key = any(${[...codeKeys]})`;
}

export async function selectPeriods(
  tx: SqlTransaction,
  participantIds: readonly string[],
): Promise<PeriodRow[]> {
  return await tx<PeriodRow[]>`
    select participant_id as "participantId", period, started_at as "startedAt",
      completed_at as "completedAt", coalesce(deviations, '{}') as deviations
    from participant_periods where participant_id = any(${[...participantIds]})
    order by participant_id, period`;
}

export async function selectStudyPeriods(
  tx: SqlTransaction,
  studyId: string,
): Promise<PeriodRow[]> {
  return await tx<PeriodRow[]>`
    select q.participant_id as "participantId", q.period, q.started_at as "startedAt",
      q.completed_at as "completedAt", coalesce(q.deviations, '{}') as deviations
    from participant_periods q join participants p on p.id = q.participant_id
    where p.study_id = ${studyId} order by q.participant_id, q.period`;
}

export async function upsertPeriodStart(
  tx: SqlTransaction,
  start: {
    readonly participantId: string;
    readonly period: number;
    readonly startedAt: Date;
    readonly stationId: string | null;
    readonly operator: string | null;
    readonly deviations: readonly string[];
  },
): Promise<void> {
  const { participantId, period, startedAt, stationId, operator, deviations } = start;
  await tx`
    insert into participant_periods
      (participant_id, period, started_at, station_id, operator, deviations)
    values (${participantId}, ${period}, ${startedAt}, ${stationId}, ${operator},
      ${[...deviations]})
    on conflict (participant_id, period) do update set started_at = excluded.started_at,
      station_id = excluded.station_id, operator = excluded.operator,
      deviations = excluded.deviations`;
}

/** Holds the occupancies, in the order of the ids, against being ended; gives those voided. */
export async function selectVoidedForShare(
  tx: SqlTransaction,
  participantIds: readonly string[],
): Promise<string[]> {
  const rows = await tx<{ id: string; ending: string | null }[]>`
    select participant_id as id, ending from occupancies
    where participant_id = any(${[...participantIds]}) order by participant_id for share`;
  return rows.filter((row) => row.ending === 'void').map((row) => row.id);
}

export async function insertPeriodsBegun(
  tx: SqlTransaction,
  begun: readonly { readonly participantId: string; readonly period: number }[],
): Promise<void> {
  await tx`
    insert into participant_periods (participant_id, period, deviations)
    select distinct participant_id, period, '{}'::text[] from unnest(
      ${begun.map((row) => row.participantId)}::uuid[], ${begun.map((row) => row.period)}::int[])
      as begun (participant_id, period)
    on conflict do nothing`;
}

/** The first time stays: a correction that comes later does not move it. */
export async function upsertPeriodsCompleted(
  tx: SqlTransaction,
  completed: readonly {
    readonly participantId: string;
    readonly period: number;
    readonly at: Date;
  }[],
): Promise<void> {
  await tx`
    insert into participant_periods (participant_id, period, completed_at, deviations)
    select participant_id, period, at, '{}'::text[] from unnest(
      ${completed.map((row) => row.participantId)}::uuid[],
      ${completed.map((row) => row.period)}::int[],
      ${completed.map((row) => row.at.toISOString())}::timestamptz[])
      as completed (participant_id, period, at)
    on conflict (participant_id, period) do update
      set completed_at = coalesce(participant_periods.completed_at, excluded.completed_at)`;
}

export async function updateOccupancyEnded(
  tx: SqlTransaction,
  participantId: string,
  ended: {
    readonly at: Date;
    readonly ending: 'withdrawn' | 'void';
    readonly reasonCode: string | null;
    readonly periodReached: number | null;
  },
): Promise<void> {
  await tx`
    update occupancies set ended_at = ${ended.at}, ending = ${ended.ending},
      reason_code = ${ended.reasonCode}, period_reached = ${ended.periodReached}
    where participant_id = ${participantId}`;
}

export async function deleteCode(tx: SqlTransaction, participantId: string): Promise<void> {
  await tx`delete from participant_codes where participant_id = ${participantId}`;
}

export async function updateErased(
  tx: SqlTransaction,
  participantId: string,
  at: Date,
): Promise<void> {
  await tx`update participants set erased_at = ${at} where id = ${participantId}`;
}
