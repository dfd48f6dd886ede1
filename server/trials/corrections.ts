import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { type Answer, once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { ProblemError } from '#platform/problems.ts';
import {
  codeKeyOf,
  findParticipants,
  type KnownParticipant,
  requireParticipant,
} from '#server/allocations/service.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import { registeredProtocol, requireVisibleStudy, type Study } from '#server/studies/service.ts';
import { type CheckedTrial, checkTrial } from './check-trial.ts';
import { type LooseRow, readFields } from './read-fields.ts';
import { type CorrectionBody, CorrectionResponse } from './schemas.ts';
import * as store from './store-trials.ts';
import { lockTrials } from './store-uploads.ts';
import { contentText, parseContent, saltContent, type TrialContent } from './trial-content.ts';
import { trialRules } from './trial-rules.ts';
import type { TrialFields } from './upload-row.ts';

/**
 * Puts a corrected version of a trial in the place of the current one, which stays. The corrected
 * record passes the same checks as an uploaded row. Audit event `trial-corrected`, with both
 * commitments and one to the reason.
 *
 * @throws {ProblemError} `not-found`, `participant-unknown`, `correction-not-possible` when there
 *   is no such trial or nothing would change, `invalid-request` naming what fails the checks
 */
export function correctTrial(
  database: Database,
  call: Call,
  studyId: string,
  body: CorrectionBody,
): Promise<Answer<CorrectionResponse>> {
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    return await once(sqlExecutor(tx), call, {
      parse: (stored) => CorrectionResponse.parse(stored),
      work: async () => {
        await lockTrials(tx, study.id);
        const participant = await knownParticipant(tx, call, study, body.participant);
        const corrected = await correct(tx, call, { study, participant, body });
        return { status: 201, body: corrected, participantId: participant.id };
      },
    });
  });
}

async function knownParticipant(
  tx: SqlTransaction,
  call: Call,
  study: Study,
  code: string,
): Promise<KnownParticipant> {
  await requireParticipant(tx, study, call.principal, code, 'read');
  const participant = (await findParticipants(tx, study.id, [code])).get(codeKeyOf(code));
  if (participant !== undefined) return participant;
  throw new ProblemError('participant-unknown', 'No participant with this code is known here.');
}

async function correct(
  tx: SqlTransaction,
  call: Call,
  {
    study,
    participant,
    body,
  }: { study: Study; participant: KnownParticipant; body: CorrectionBody },
): Promise<CorrectionResponse> {
  const executor = sqlExecutor(tx);
  const { period, repetition } = body;
  const place = { participantId: participant.id, period, repetition };
  const before = await store.selectCurrentTrial(tx, place);
  if (before === null) {
    throw new ProblemError(
      'correction-not-possible',
      'No trial of this participant is stored for this period and repetition.',
    );
  }
  const registered = await registeredProtocol(executor, study.id, participant.protocolVersion);
  const fields = fieldsOf(merged(body, parseContent(before.content)));
  const rules = trialRules(registered);
  const checked = checkTrial(fields, participant, rules);
  requireFaultless(checked.faults);
  const content = contentText(fields, checked, rules);
  if (content === before.content) {
    throw new ProblemError('correction-not-possible', 'The trial reads so already.');
  }
  const trial = newVersion(place, fields, checked, content, before.version + 1);
  await store.insertCorrection(tx, study.id, trial, call.now);
  const owner = { studyId: study.id, participantId: participant.id };
  await appendEntry(executor, {
    chain: study.id,
    actor: actorOf(call),
    action: 'trial-corrected',
    subject: trial.id,
    details: {
      ...place,
      commitment: trial.commitment,
      previousCommitment: before.commitment,
      reason: await commitTo(executor, body.reason, owner),
      version: trial.version,
    },
    at: call.now,
  });
  const { id, version, condition, deviation, commitment } = trial;
  return {
    ...place,
    id,
    version,
    condition,
    deviation,
    flags: [...trial.flags],
    commitment,
    correctedAt: call.now.toISOString(),
  };
}

function newVersion(
  place: store.TrialPlace,
  fields: TrialFields,
  checked: CheckedTrial,
  content: string,
  version: number,
): store.NewTrial {
  const { condition, recordId } = fields;
  const { deviation, flags } = checked;
  const salted = saltContent(content);
  return {
    ...place,
    ...salted,
    id: uuidv7(),
    version,
    condition,
    deviation,
    flags,
    recordId,
    content,
  };
}

/** The row as it should be: values and reasons as given, the rest as it was where absent. */
function merged(body: CorrectionBody, before: TrialContent): LooseRow {
  return {
    participant: body.participant,
    period: body.period,
    repetition: body.repetition,
    recordId: before.recordId,
    values: body.values,
    missing: body.missing ?? {},
    condition: body.condition ?? before.condition,
    startedAt: body.startedAt ?? before.startedAt,
    endedAt: body.endedAt === undefined ? before.endedAt : body.endedAt,
    note: body.note === undefined ? before.note : body.note,
  };
}

function fieldsOf(row: LooseRow): TrialFields {
  const { fields, faults } = readFields(row);
  requireFaultless(faults);
  if (fields === null) throw new Error('A row without faults has its fields.');
  return fields;
}

function requireFaultless(faults: CheckedTrial['faults']): void {
  if (faults.length === 0) return;
  throw new ProblemError('invalid-request', 'The corrected trial does not fit the protocol.', {
    faults,
  });
}
