import type { SqlTransaction } from '#platform/database.ts';

export interface SnapshotRow {
  readonly id: string;
  readonly studyId: string;
  readonly sha256: string;
  readonly body: string;
  readonly createdAt: Date;
}

export interface SnapshotParticipantRow {
  readonly snapshotId: string;
  readonly participantId: string;
  readonly salt: Uint8Array;
  readonly content: string;
}

/** Rows of one insert: four parameters each, far below the protocol's 65,535. */
const INSERT_ROWS = 1000;

/**
 * Holds off the erasure of these participants until the transaction ends, and tells how many of
 * them are not erased.
 */
export async function lockKeptParticipants(
  tx: SqlTransaction,
  ids: readonly string[],
): Promise<number> {
  const rows = await tx`
    select id from participants where id = any(${[...ids]}::uuid[]) and erased_at is null
    order by id for share`;
  return rows.length;
}

export async function lockParticipant(tx: SqlTransaction, id: string): Promise<void> {
  await tx`select id from participants where id = ${id} for no key update`;
}

export async function insertSnapshot(tx: SqlTransaction, row: SnapshotRow): Promise<void> {
  await tx`
    insert into snapshots (id, study_id, sha256, body, created_at)
    values (${row.id}, ${row.studyId}, ${row.sha256}, ${row.body}, ${row.createdAt})`;
}

export async function insertSnapshotParticipants(
  tx: SqlTransaction,
  rows: readonly SnapshotParticipantRow[],
): Promise<void> {
  for (let from = 0; from < rows.length; from += INSERT_ROWS) {
    const batch = rows.slice(from, from + INSERT_ROWS).map((row) => ({
      snapshot_id: row.snapshotId,
      participant_id: row.participantId,
      salt: row.salt,
      content: row.content,
    }));
    await tx`insert into snapshot_participants ${tx(batch)}`;
  }
}

export async function selectSnapshot(
  tx: SqlTransaction,
  id: string,
): Promise<{ sha256: string; body: string }> {
  const rows = await tx<{ sha256: string; body: string }[]>`
    select sha256, body from snapshots where id = ${id}`;
  if (rows[0] === undefined) throw new Error(`The snapshot ${id} is gone.`);
  return rows[0];
}

export async function selectSnapshotContents(
  tx: SqlTransaction,
  id: string,
): Promise<{ salt: Uint8Array; content: string }[]> {
  const rows = await tx<{ salt: Uint8Array; content: string }[]>`
    select salt, content from snapshot_participants where snapshot_id = ${id}`;
  return rows.map(({ salt, content }) => ({ salt, content }));
}

export async function deleteSnapshotParticipants(
  tx: SqlTransaction,
  participantId: string,
): Promise<void> {
  await tx`delete from snapshot_participants where participant_id = ${participantId}`;
}
