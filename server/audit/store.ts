import { z } from 'zod';
import type { Executor, SqlTransaction } from '#platform/database.ts';

export interface StoredEntry {
  readonly number: number;
  readonly content: string;
  readonly previousHash: string;
  readonly hash: string;
  readonly at: Date;
}

const appended = z.tuple([z.object({ number: z.coerce.number(), hash: z.string() })]);

/** Appends through the database's own function, which keeps the chain (see the first migration). */
export async function insertEntry(
  executor: Executor,
  chain: string,
  content: string,
  at: Date,
): Promise<{ number: number; hash: string }> {
  const rows = await executor.query(
    'select number::float8 as number, hash from audit_append($1, $2, $3::timestamptz)',
    [chain, content, at],
  );
  return appended.parse(rows)[0];
}

export async function insertDisclosure(
  executor: Executor,
  row: {
    commitment: string;
    studyId: string | null;
    participantId: string | null;
    salt: Uint8Array;
    value: string;
  },
): Promise<void> {
  await executor.query(
    `insert into disclosures (commitment, study_id, participant_id, salt, value)
     values ($1, $2::uuid, $3::uuid, $4, $5)`,
    [row.commitment, row.studyId, row.participantId, row.salt, row.value],
  );
}

/** Removes what opens the commitments of one participant; the commitments stay in the log. */
export async function deleteDisclosures(executor: Executor, participantId: string): Promise<void> {
  await executor.query('delete from disclosures where participant_id = $1::uuid', [participantId]);
}

const lookNumber = z.tuple([z.object({ number: z.number().int() })]);

/** The study's chain is locked by the entry that was just appended, so the count cannot race. */
export async function insertLook(
  executor: Executor,
  look: {
    studyId: string;
    kind: string;
    duringEnrolment: boolean;
    auditNumber: number;
    at: Date;
  },
): Promise<number> {
  const rows = await executor.query(
    `insert into looks (study_id, number, kind, during_enrolment, audit_number, at)
     select $1::uuid, coalesce(max(number), 0) + 1, $2, $3::boolean, $4::bigint, $5::timestamptz
     from looks where study_id = $1::uuid returning number`,
    [look.studyId, look.kind, look.duringEnrolment, look.auditNumber, look.at],
  );
  return lookNumber.parse(rows)[0].number;
}

export async function countLooks(
  executor: Executor,
  studyId: string,
): Promise<{ kind: string; duringEnrolment: boolean; count: number }[]> {
  const rows = await executor.query(
    `select kind, during_enrolment as "duringEnrolment", count(*)::int as count
     from looks where study_id = $1::uuid group by 1, 2 order by 1, 2`,
    [studyId],
  );
  return z
    .array(z.object({ kind: z.string(), duringEnrolment: z.boolean(), count: z.number() }))
    .parse(rows);
}

export async function selectChains(tx: SqlTransaction): Promise<string[]> {
  // A chain whose head row was removed still has entries, and the other way round.
  const rows = await tx<{ chain: string }[]>`
    select chain from audit_chains union select chain from audit_entries order by chain`;
  return rows.map((row) => row.chain);
}

export async function selectHead(
  tx: SqlTransaction,
  chain: string,
): Promise<{ number: number; hash: string } | null> {
  const rows = await tx<{ number: number; hash: string }[]>`
    select last_number::float8 as number, last_hash as hash
    from audit_chains where chain = ${chain}`;
  return rows[0] ?? null;
}

export async function selectEntries(
  tx: SqlTransaction,
  chain: string,
  after: number,
  limit: number,
): Promise<StoredEntry[]> {
  return await tx<StoredEntry[]>`
    select number::float8 as number, content, previous_hash as "previousHash", hash, at
    from audit_entries where chain = ${chain} and number > ${after} order by number limit ${limit}`;
}

/** All entries of a chain in order, a batch at a time, so that long chains do not fill memory. */
export function streamEntries(tx: SqlTransaction, chain: string): AsyncIterable<StoredEntry[]> {
  return tx<StoredEntry[]>`
    select number::float8 as number, content, previous_hash as "previousHash", hash, at
    from audit_entries where chain = ${chain} order by number`.cursor(1000);
}

export interface StoredDisclosure {
  readonly commitment: string;
  readonly salt: Uint8Array;
  readonly value: string;
}

export function streamDisclosures(
  tx: SqlTransaction,
  studyId: string,
): AsyncIterable<StoredDisclosure[]> {
  return tx<StoredDisclosure[]>`
    select commitment, salt, value from disclosures where study_id = ${studyId}`.cursor(1000);
}

export interface StoredCheckpoint {
  readonly id: string;
  readonly document: string;
  readonly signature: string;
  readonly createdAt: Date;
}

/** @param labId the lab whose chains the checkpoint vouches for; null for the whole service */
export async function insertCheckpoint(
  tx: SqlTransaction,
  row: StoredCheckpoint,
  labId: string | null,
): Promise<void> {
  await tx`
    insert into audit_checkpoints (id, lab_id, document, signature, created_at)
    values (${row.id}, ${labId}, ${row.document}, ${row.signature}, ${row.createdAt})`;
}

/** Checkpoints of one lab, or all of them when `labId` is null. */
export async function selectCheckpoints(
  tx: SqlTransaction,
  filter: { labId: string | null; after: string | null; limit: number },
): Promise<StoredCheckpoint[]> {
  const { labId, after, limit } = filter;
  return await tx<StoredCheckpoint[]>`
    select id, document, signature, created_at as "createdAt" from audit_checkpoints
    where (${labId}::uuid is null or lab_id = ${labId}::uuid)
      and (${after}::uuid is null or id > ${after}::uuid)
    order by id limit ${limit}`;
}

/** The key under `name`, made by `make` at first start. Safe with two starts at once. */
export async function ensureKey(
  tx: SqlTransaction,
  name: string,
  make: () => Uint8Array,
  now: Date,
): Promise<Uint8Array> {
  await tx`
    insert into service_keys (name, material, created_at) values (${name}, ${make()}, ${now})
    on conflict do nothing`;
  const rows = await tx<{ material: Uint8Array }[]>`
    select material from service_keys where name = ${name}`;
  const material = rows[0]?.material;
  if (material === undefined) throw new Error(`The service key ${name} could not be kept.`);
  return material;
}
