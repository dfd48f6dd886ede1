import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import {
  codeKeyOf,
  eraseParticipantRecords,
  participantRecords,
  requireParticipant,
} from '#server/allocations/service.ts';
import { appendEntry, forgetDisclosures } from '#server/audit/log.ts';
import { requireVisibleStudy, type Study } from '#server/studies/service.ts';
import type { ErasureBody, ErasureResponse } from './schemas.ts';
import { eraseTrialContents } from './store-trials.ts';
import { eraseRefusedRows, eraseUploadHashes, lockTrials } from './store-uploads.ts';

/** What a feature above forgets of a participant, in the transaction of the erasure. */
export type ForgetParticipant = (tx: SqlTransaction, participantId: string) => Promise<void>;

/**
 * Erases a participant: the code, every value and note, refused rows, what opens the log's
 * commitments, the kept answers to requests, and what the features above hold. A tombstone stays:
 * slot, site, stratum, times, and for each trial its place, condition and commitment, so that log,
 * snapshots and counts still agree. The same code can then arrive again, as somebody new.
 *
 * Audit event `participant-erased`, with a coded reason. Asking again by id gives the same answer
 * and no second entry; it goes through no Idempotency-Key, which would keep a hash of the code.
 *
 * @throws {ProblemError} `not-found`, `participant-unknown`
 */
export function eraseParticipant(
  database: Database,
  call: Call,
  place: { readonly studyId: string; readonly code: string },
  body: ErasureBody,
  forget: readonly ForgetParticipant[],
): Promise<ErasureResponse> {
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await requireVisibleStudy(executor, call.principal, place.studyId);
    await lockTrials(tx, study.id);
    const erased = await erasedBefore(tx, study, place.code);
    if (erased !== null) return erased;
    const row = await requireParticipant(tx, study, call.principal, place.code, 'lock');
    const codeKey = row.code === null ? null : codeKeyOf(row.code);
    await eraseRefusedRows(tx, { studyId: study.id, participantId: row.id, codeKey });
    await eraseUploadHashes(tx, study.id);
    await eraseTrialContents(tx, row.id);
    for (const forgetParticipant of forget) await forgetParticipant(tx, row.id);
    await eraseParticipantRecords(tx, row.id, call.now);
    await forgetDisclosures(executor, row.id);
    await appendEntry(executor, {
      chain: study.id,
      actor: actorOf(call),
      action: 'participant-erased',
      subject: row.id,
      details: { reasonCode: body.reasonCode, siteId: row.siteId, slotNumber: row.slotNumber },
      at: call.now,
    });
    return { participantId: row.id, erasedAt: call.now.toISOString() };
  });
}

/** The tombstone, when the participant of this id was erased before. */
async function erasedBefore(
  tx: SqlTransaction,
  study: Study,
  id: string,
): Promise<ErasureResponse | null> {
  const records = await participantRecords(tx, study.id);
  const record = records.find((one) => one.id === id.toLowerCase());
  if (record === undefined || record.erasedAt === null) return null;
  return { participantId: record.id, erasedAt: record.erasedAt.toISOString() };
}
