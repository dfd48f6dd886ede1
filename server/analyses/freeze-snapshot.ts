import { randomBytes } from 'node:crypto';
import {
  canonicalSnapshotBody,
  type SnapshotBody,
  type StoredContent,
  snapshotSha256,
  splitSnapshot,
} from '#core/analysis/snapshot.ts';
import { canonicalJson, jsonValueOf } from '#core/hashing/canonical-json.ts';
import { SERVICE_ACTOR } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { uuidv7 } from '#platform/ids.ts';
import { appendEntry, countLooks, recordLook } from '#server/audit/log.ts';
import { type Reading, readStudy } from './read-study.ts';
import { requesterOf } from './requester.ts';
import * as store from './store.ts';
import * as snapshotStore from './store-snapshots.ts';

/** Readings that may turn out stale, because somebody was erased meanwhile, before giving up. */
const READINGS_MAX = 5;

/** Bytes of the salt of each commitment. */
const SALT_BYTES = 16;

/** What storing a reading came to. */
type Stored = { readonly snapshotId: string } | 'stale' | 'cancelled';

/**
 * Freezes the data of a study for an analysis; a second call for the same analysis gives what the
 * first one froze. Audit `looked` and `snapshot-frozen`.
 *
 * The data are read in one REPEATABLE READ transaction that changes nothing and therefore makes no
 * station wait. A second, short transaction stores them and counts the look. Should a participant
 * have been erased in between, nothing is stored and the reading starts again; an erasure that
 * comes later finds what was stored here (see `forgetSnapshotParticipant`).
 *
 * @returns the snapshot's id; null when the analysis was cancelled, which is then not a look
 */
export async function freezeSnapshot(
  database: Database,
  analysis: store.TakenAnalysis,
): Promise<string | null> {
  for (let reading = 1; reading <= READINGS_MAX; reading += 1) {
    const study = await database.inReadingTransaction((tx) =>
      readStudy(tx, database.records, analysis),
    );
    const { body, contents } = splitSnapshot(study.snapshot, () => randomBytes(SALT_BYTES));
    const stored = await database.inSqlTransaction((tx) =>
      storeSnapshot(tx, analysis, { study, body, contents }),
    );
    if (stored === 'cancelled') return null;
    if (stored !== 'stale') return stored.snapshotId;
  }
  throw new Error(`Participants were erased during each of ${READINGS_MAX} readings.`);
}

/** `stale` when somebody whose data were read has been erased. */
async function storeSnapshot(
  tx: SqlTransaction,
  analysis: store.TakenAnalysis,
  read: { study: Reading; body: SnapshotBody; contents: readonly StoredContent[] },
): Promise<Stored> {
  const withContent = read.contents.map(({ content }) => content.participantId);
  if ((await snapshotStore.lockKeptParticipants(tx, withContent)) < withContent.length) {
    return 'stale';
  }
  const now = await store.lockAnalysis(tx, analysis.id);
  if (now === null) throw new Error(`The analysis ${analysis.id} is gone.`);
  if (now.cancelRequested) return 'cancelled';
  if (now.snapshotId !== null) return { snapshotId: now.snapshotId };

  const { studyId } = analysis;
  const at = new Date();
  const id = uuidv7();
  const executor = sqlExecutor(tx);
  await recordLook(executor, {
    studyId,
    kind: 'analysis',
    duringEnrolment: read.body.enrolment !== 'closed',
    actor: requesterOf(analysis),
    subject: analysis.id,
    details: { participants: withContent.length, ...read.study.accounted },
    at,
  });
  const body: SnapshotBody = { ...read.body, looks: await countLooks(executor, studyId) };
  const sha256 = snapshotSha256(body);
  const text = canonicalSnapshotBody(body);
  await snapshotStore.insertSnapshot(tx, { id, studyId, sha256, body: text, createdAt: at });
  await snapshotStore.insertSnapshotParticipants(
    tx,
    read.contents.map(({ salt, content }) => ({
      snapshotId: id,
      participantId: content.participantId,
      salt,
      content: canonicalJson(jsonValueOf(content)),
    })),
  );
  await store.updateSnapshot(tx, analysis.id, id);
  await appendEntry(executor, {
    chain: studyId,
    actor: SERVICE_ACTOR,
    action: 'snapshot-frozen',
    subject: id,
    details: { analysisId: analysis.id, sha256 },
    at,
  });
  return { snapshotId: id };
}
