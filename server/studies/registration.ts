import { randomBytes } from 'node:crypto';
import { SECRET_BYTES, secretHashOf } from '#core/allocation/keyed-draw.ts';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { sha256Hex } from '#core/hashing/digest.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type RecordsTransaction, recordsExecutor } from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import { protocolFaults, requireDraft, requireRevision } from './drafts.ts';
import { type RegisterProtocolBody, VersionResponse } from './schemas.ts';
import * as store from './store.ts';
import { lockVisibleStudy, type Study } from './visibility.ts';

/**
 * Registers the draft: the version is fixed and hashed. The first one opens enrolment and makes the
 * study's allocation secret, of which only the hash is published; later ones amend the protocol for
 * whoever arrives from then on. One transaction, once per Idempotency-Key. Audit event
 * `protocol-registered`.
 *
 * @throws {ProblemError} `not-found`, `wrong-state`, `no-draft`, `revision-conflict`,
 *   `reason-needed`, `protocol-not-registrable` with every fault
 */
export function registerProtocol(
  database: Database,
  call: Call,
  studyId: string,
  body: RegisterProtocolBody,
) {
  return database.inRecordsTransaction(async (tx) => {
    const executor = recordsExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    return await once(executor, call, {
      parse: (stored) => VersionResponse.parse(stored),
      work: async () => ({ status: 201, body: await register(tx, call, study, body) }),
    });
  });
}

async function register(
  tx: RecordsTransaction,
  call: Call,
  study: Study,
  body: RegisterProtocolBody,
): Promise<VersionResponse> {
  if (study.state === 'closed') {
    throw new ProblemError('wrong-state', 'The study is closed: its protocol is final.');
  }
  const { number, revision, protocol } = await requireDraft(tx, study.id);
  requireRevision(revision, body.revision);
  const reason = body.reason ?? null;
  if (number > 1 && reason === null) {
    throw new ProblemError('reason-needed', 'Say why the registered protocol is amended.', {
      faults: [{ pointer: '/reason', code: 'required', message: 'A reason must be given.' }],
    });
  }
  const faults = await protocolFaults(tx, protocol);
  if (faults.length > 0) {
    throw new ProblemError('protocol-not-registrable', 'The draft has faults.', { faults });
  }
  const document = canonicalJson(protocol);
  const sha256 = sha256Hex(document);
  await store.updateDraftRegistered(tx, {
    studyId: study.id,
    number,
    document,
    sha256,
    reason,
    registeredAt: call.now,
  });
  await store.replaceSiteTargets(tx, study.id, protocol.sites);
  const opening = study.currentVersion === null ? openEnrolment() : null;
  await store.updateStudyRegistered(tx, study.id, { currentVersion: number, ...opening });
  const executor = recordsExecutor(tx);
  const owner = { studyId: study.id, participantId: null };
  await appendEntry(executor, {
    chain: study.id,
    actor: actorOf(call),
    action: 'protocol-registered',
    subject: study.id,
    details: {
      number,
      sha256,
      secretHash: opening === null ? study.secretHash : opening.secretHash,
      reason: reason === null ? null : await commitTo(executor, reason, owner),
    },
    at: call.now,
  });
  const registeredAt = call.now.toISOString();
  return { studyId: study.id, number, sha256, reason, registeredAt, protocol };
}

/** Enrolment opens with a new secret, whose hash is published and which itself is not. */
function openEnrolment() {
  const secret = new Uint8Array(randomBytes(SECRET_BYTES));
  return { state: 'enrolling', secret, secretHash: secretHashOf(secret) };
}
