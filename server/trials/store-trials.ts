import type { SqlTransaction } from '#platform/database.ts';
import { copyField, copyRows } from './copy-text.ts';

/** A trial to be stored, with its erasable half. */
export interface NewTrial {
  readonly id: string;
  readonly participantId: string;
  readonly period: number;
  readonly repetition: number;
  readonly version: number;
  readonly condition: string;
  readonly deviation: boolean;
  readonly flags: readonly string[];
  readonly commitment: string;
  readonly recordId: string;
  /** Hexadecimal. */
  readonly salt: string;
  readonly content: string;
}

/** Where a record stands: in which period of whom, as which repetition. */
export interface TrialPlace {
  readonly participantId: string;
  readonly period: number;
  readonly repetition: number;
}

/**
 * Stores first versions of trials, both halves, by two COPYs. Keys and codes of a protocol need no
 * escape; free text does.
 */
export async function copyTrials(
  tx: SqlTransaction,
  origin: { readonly studyId: string; readonly uploadId: string; readonly receivedAt: Date },
  trials: readonly NewTrial[],
): Promise<void> {
  if (trials.length === 0) return;
  const { studyId, uploadId } = origin;
  const receivedAt = origin.receivedAt.toISOString();
  let records = '';
  let contents = '';
  for (const trial of trials) {
    const { id, participantId, version } = trial;
    const place = `${trial.period}\t${trial.repetition}\t${version}\tt`;
    const seen = `${trial.condition}\t${trial.deviation ? 't' : 'f'}\t{${trial.flags.join(',')}}`;
    records += `${id}\t${studyId}\t${participantId}\t${place}\t${seen}\t`;
    records += `${trial.commitment}\t${uploadId}\t${receivedAt}\n`;
    contents += `${id}\t${studyId}\t${participantId}\t${copyField(trial.recordId)}\t${version}\t`;
    contents += `\\\\x${trial.salt}\t${copyField(trial.content)}\n`;
  }
  const recordCopy = tx`
    copy trials (id, study_id, participant_id, period, repetition, version, current, condition,
      deviation, flags, commitment, upload_id, received_at) from stdin`;
  await copyRows(recordCopy, records);
  const contentCopy = tx`
    copy trial_contents (trial_id, study_id, participant_id, record_id, version, salt, content)
    from stdin`;
  await copyRows(contentCopy, contents);
}

/** Places of these participants at which a record is stored. */
export async function selectStoredPlaces(
  tx: SqlTransaction,
  participantIds: readonly string[],
): Promise<TrialPlace[]> {
  return await tx<TrialPlace[]>`
    select participant_id as "participantId", period, repetition from trials
    where participant_id = any(${[...participantIds]}::uuid[]) and current`;
}

/** Every version of the records at these places. */
export async function selectContentsAt(
  tx: SqlTransaction,
  places: readonly TrialPlace[],
): Promise<(TrialPlace & { current: boolean; content: string })[]> {
  return await tx<(TrialPlace & { current: boolean; content: string })[]>`
    select t.participant_id as "participantId", t.period, t.repetition, t.current, c.content
    from unnest(
        ${places.map((place) => place.participantId)}::uuid[],
        ${places.map((place) => place.period)}::int[],
        ${places.map((place) => place.repetition)}::int[])
        as wanted (participant_id, period, repetition)
      join trials t using (participant_id, period, repetition)
      join trial_contents c on c.trial_id = t.id`;
}

/** Which of these record ids of a study are taken, and by the record at which place. */
export async function selectRecordIds(
  tx: SqlTransaction,
  studyId: string,
  recordIds: readonly string[],
): Promise<(TrialPlace & { recordId: string })[]> {
  return await tx<(TrialPlace & { recordId: string })[]>`
    select c.record_id as "recordId", t.participant_id as "participantId", t.period, t.repetition
    from trial_contents c join trials t on t.id = c.trial_id
    where c.study_id = ${studyId} and c.record_id = any(${[...recordIds]})`;
}

/** Takes back what an upload stored in the transaction at hand. */
export async function deleteTrialsOfUpload(
  tx: SqlTransaction,
  uploadId: string,
  participantIds: readonly string[],
): Promise<void> {
  const ids = [...participantIds];
  await tx`
    delete from trial_contents where trial_id in (select id from trials
      where participant_id = any(${ids}::uuid[]) and upload_id = ${uploadId})`;
  await tx`
    delete from trials where participant_id = any(${ids}::uuid[]) and upload_id = ${uploadId}`;
}

export interface StoredTrial {
  readonly id: string;
  readonly version: number;
  readonly commitment: string;
  readonly content: string;
}

/** The current version of a record, if it is stored and not erased. */
export async function selectCurrentTrial(
  tx: SqlTransaction,
  { participantId, period, repetition }: TrialPlace,
): Promise<StoredTrial | null> {
  const rows = await tx<StoredTrial[]>`
    select t.id, t.version, t.commitment, c.content
    from trials t join trial_contents c on c.trial_id = t.id
    where t.participant_id = ${participantId} and t.period = ${period}
      and t.repetition = ${repetition} and t.current`;
  return rows[0] ?? null;
}

/** Puts a corrected version in the place of the current one, which stays as an earlier version. */
export async function insertCorrection(
  tx: SqlTransaction,
  studyId: string,
  trial: NewTrial,
  receivedAt: Date,
): Promise<void> {
  const { id, participantId, period, repetition, version } = trial;
  await tx`
    update trials set current = false where participant_id = ${participantId}
      and period = ${period} and repetition = ${repetition} and current`;
  await tx`
    insert into trials (id, study_id, participant_id, period, repetition, version, current,
      condition, deviation, flags, commitment, upload_id, received_at)
    values (${id}, ${studyId}, ${participantId}, ${period}, ${repetition}, ${version}, true,
      ${trial.condition}, ${trial.deviation}, ${[...trial.flags]}, ${trial.commitment}, null,
      ${receivedAt})`;
  await tx`
    insert into trial_contents
      (trial_id, study_id, participant_id, record_id, version, salt, content)
    values (${id}, ${studyId}, ${participantId}, ${trial.recordId}, ${version},
      ${Buffer.from(trial.salt, 'hex')}, ${trial.content})`;
}

/** Deletes what was recorded of a participant; the records stay as tombstones with commitments. */
export async function eraseTrialContents(tx: SqlTransaction, participantId: string): Promise<void> {
  await tx`delete from trial_contents where participant_id = ${participantId}`;
  // A flag says something of a value.
  await tx`update trials set flags = '{}' where participant_id = ${participantId}`;
}

export interface TrialRow extends TrialPlace {
  readonly id: string;
  readonly condition: string;
  readonly deviation: boolean;
  readonly flags: string[];
  readonly version: number;
  readonly current: boolean;
  readonly uploadId: string | null;
  readonly receivedAt: Date;
  /** Null once erased. */
  readonly content: string | null;
}

const READ_BATCH = 1000;

/** The trials of a study by participant, period, repetition and version, a batch at a time. */
export function streamTrials(
  tx: SqlTransaction,
  studyId: string,
  versions: 'current' | 'all',
): AsyncIterable<TrialRow[]> {
  return tx<TrialRow[]>`
    select t.id, t.participant_id as "participantId", t.period, t.repetition, t.condition,
      t.deviation, coalesce(t.flags, '{}') as flags, t.version, t.current,
      t.upload_id as "uploadId", t.received_at as "receivedAt", c.content
    from trials t left join trial_contents c on c.trial_id = t.id
    where t.study_id = ${studyId} and (t.current or ${versions === 'all'})
    order by t.participant_id, t.period, t.repetition, t.version`.cursor(READ_BATCH);
}
