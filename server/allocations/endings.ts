import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { type Answer, once } from '#platform/idempotency.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import { registeredProtocol, requireVisibleStudy, type Study } from '#server/studies/service.ts';
import { participantResponse, requireOngoing, requireParticipant } from './participants.ts';
import { reportedTime } from './reported-time.ts';
import { ParticipantResponse, type VoidBody, type WithdrawalBody } from './schemas.ts';
import * as store from './store-participants.ts';

/**
 * A participant stops. The slot is vacated and goes to the next arrival of the site and stratum, if
 * the protocol replaces. What was collected before stays. Audit event `participant-withdrawn`, with
 * a commitment to the note.
 *
 * @throws {ProblemError} `not-found`, `participant-ended`, `invalid-request` for a period that was
 *   not reached or does not exist or a time that cannot be, and as `requireParticipant`
 */
export function recordWithdrawal(
  database: Database,
  call: Call,
  studyId: string,
  code: string,
  body: WithdrawalBody,
): Promise<Answer<ParticipantResponse>> {
  return ending(database, call, studyId, code, async (tx, study, row) => {
    const executor = sqlExecutor(tx);
    const at = reportedTime('withdrawnAt', body.withdrawnAt, call.now, row.arrivedAt);
    const { reasonCode, periodReached } = body;
    await requireReached(tx, study, row, periodReached, at);
    await store.updateOccupancyEnded(tx, row.id, {
      at,
      ending: 'withdrawn',
      reasonCode,
      periodReached,
    });
    const owner = { studyId: study.id, participantId: row.id };
    await appendEntry(executor, {
      chain: study.id,
      actor: actorOf(call),
      action: 'participant-withdrawn',
      subject: row.id,
      details: {
        note: body.note === undefined ? null : await commitTo(executor, body.note, owner),
        periodReached,
        reasonCode,
        siteId: row.siteId,
        slotNumber: row.slotNumber,
        withdrawnAt: at.toISOString(),
      },
      at: call.now,
    });
  });
}

/**
 * Undoes a check-in that was a mistake, which is no withdrawal: nobody took part. The slot is
 * offered to the next arrival of the site and stratum before any other, and the code is free again.
 * Audit event `arrival-voided`, with a commitment to the reason.
 *
 * @throws {ProblemError} `not-found`, `participant-ended`, `has-data` once a period was started or
 *   a trial stored, and as `requireParticipant`
 */
export function voidArrival(
  database: Database,
  call: Call,
  studyId: string,
  code: string,
  body: VoidBody,
): Promise<Answer<ParticipantResponse>> {
  return ending(database, call, studyId, code, async (tx, study, row) => {
    const executor = sqlExecutor(tx);
    if ((await store.selectPeriods(tx, [row.id])).length > 0) {
      throw new ProblemError('has-data', 'The participant has begun: record a withdrawal instead.');
    }
    await store.updateOccupancyEnded(tx, row.id, {
      at: call.now,
      ending: 'void',
      reasonCode: null,
      periodReached: null,
    });
    await store.deleteCode(tx, row.id);
    const owner = { studyId: study.id, participantId: row.id };
    await appendEntry(executor, {
      chain: study.id,
      actor: actorOf(call),
      action: 'arrival-voided',
      subject: row.id,
      details: {
        reason: await commitTo(executor, body.reason, owner),
        siteId: row.siteId,
        slotNumber: row.slotNumber,
      },
      at: call.now,
    });
  });
}

/** What both endings share: one transaction, once, the participant locked and still taking part. */
function ending(
  database: Database,
  call: Call,
  studyId: string,
  code: string,
  end: (tx: SqlTransaction, study: Study, row: store.ParticipantRow) => Promise<void>,
): Promise<Answer<ParticipantResponse>> {
  const { principal } = call;
  return database.inSqlTransaction(async (tx) => {
    const executor = sqlExecutor(tx);
    const study = await requireVisibleStudy(executor, principal, studyId);
    const ended = async (id: string) => {
      const row = await store.selectParticipant(tx, study.id, { id }, 'read');
      if (row === null) throw new Error(`The participant ${id} is gone.`);
      return await participantResponse(tx, study, principal, row);
    };
    const answer = await once(executor, call, {
      parse: (stored) => ParticipantResponse.parse(stored),
      // The code lives in its erasable row alone.
      keep: (kept) => ({ ...kept, code: null }),
      work: async () => {
        const row = await requireParticipant(tx, study, principal, code, 'lock');
        requireOngoing(row);
        await end(tx, study, row);
        return { status: 200, body: await ended(row.id), participantId: row.id };
      },
    });
    if (!answer.repeated) return answer;
    return { ...answer, body: { ...answer.body, code: (await ended(answer.body.id)).code } };
  });
}

/** A period that was reached exists, and is none before the last that was started by then. */
async function requireReached(
  tx: SqlTransaction,
  study: Study,
  row: store.ParticipantRow,
  periodReached: number,
  at: Date,
): Promise<void> {
  const registered = await registeredProtocol(sqlExecutor(tx), study.id, row.protocolVersion);
  const { count } = registered.protocol.periods;
  const begun = (await store.selectPeriods(tx, [row.id])).filter(
    ({ startedAt, completedAt }) => completedAt !== null || (startedAt !== null && startedAt <= at),
  );
  const least = Math.max(0, ...begun.map(({ period }) => period));
  if (periodReached >= least && periodReached <= count) return;
  throw new ProblemError('invalid-request', 'The participant did not end in this period.', {
    faults: [
      {
        pointer: '/periodReached',
        code: 'period-not-reached',
        message: `Must be from ${least}, the last period begun, to ${count}.`,
      },
    ],
  });
}
