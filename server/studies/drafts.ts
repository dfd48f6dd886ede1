import { planContrastFaults } from '#core/designs/plan-contrasts.ts';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { sha256Hex } from '#core/hashing/digest.ts';
import { checkProtocol } from '#core/protocol/check-protocol.ts';
import type { ProtocolFault } from '#core/protocol/fault.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type RecordsTransaction, recordsExecutor } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import { findSites } from '#server/access/service.ts';
import { appendEntry } from '#server/audit/log.ts';
import { ProtocolDocument } from './protocol-document.ts';
import type { DraftResponse, PutDraftBody } from './schemas.ts';
import * as store from './store.ts';
import { lockVisibleStudy, requireVisibleStudy } from './visibility.ts';

/** @throws {ProblemError} `not-found`, `no-draft` */
export function getDraft(database: Database, call: Call, studyId: string): Promise<DraftResponse> {
  return database.inRecordsTransaction(async (tx) => {
    await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId);
    const { number, revision, createdAt, protocol } = await requireDraft(tx, studyId);
    return { number, revision, createdAt: createdAt.toISOString(), protocol };
  });
}

/**
 * Saves a draft, registrable or not, in place of the revision it names. Audit event `draft-saved`
 * with the hash of the document.
 *
 * @throws {ProblemError} `not-found`, `wrong-state` once closed, `revision-conflict`
 */
export function putDraft(database: Database, call: Call, studyId: string, body: PutDraftBody) {
  return database.inRecordsTransaction(async (tx) => {
    const executor = recordsExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    if (study.state === 'closed') {
      throw new ProblemError('wrong-state', 'The study is closed: its protocol is final.');
    }
    const draft = await store.selectDraft(tx, studyId);
    requireRevision(draft?.revision ?? 0, body.revision);
    const document = canonicalJson(body.protocol);
    const number = draft?.number ?? (study.currentVersion ?? 0) + 1;
    const revision = body.revision + 1;
    if (draft === null) {
      await store.insertDraft(tx, { studyId, number, document, createdAt: call.now });
    } else {
      await store.updateDraft(tx, { studyId, number, document, revision });
    }
    await appendEntry(executor, {
      chain: studyId,
      actor: actorOf(call),
      action: 'draft-saved',
      subject: studyId,
      details: { number, revision, sha256: sha256Hex(document) },
      at: call.now,
    });
    return { number, revision };
  });
}

/** Everything that keeps the draft from being registered. @throws {ProblemError} as `getDraft` */
export function checkDraft(database: Database, call: Call, studyId: string) {
  return database.inRecordsTransaction(async (tx) => {
    await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId);
    const { revision, protocol } = await requireDraft(tx, studyId);
    const faults = await protocolFaults(tx, protocol);
    return { revision, registrable: faults.length === 0, faults };
  });
}

/** @throws {ProblemError} `no-draft` */
export async function requireDraft(tx: RecordsTransaction, studyId: string) {
  const row = await store.selectDraft(tx, studyId);
  if (row === null) throw new ProblemError('no-draft', 'The study has no protocol draft.');
  return { ...row, protocol: ProtocolDocument.parse(JSON.parse(row.document)) };
}

/** @throws {ProblemError} `revision-conflict` when somebody saved in between */
export function requireRevision(current: number, named: number): void {
  if (current === named) return;
  throw new ProblemError(
    'revision-conflict',
    `The draft is at revision ${current}, the request names ${named}. Read it again first.`,
  );
}

/**
 * Every fault at once: the core's rules, and whether the sites exist. A lead may name sites of
 * other labs, which must have told their id: nobody can list another lab's sites.
 */
export async function protocolFaults(
  tx: RecordsTransaction,
  protocol: ProtocolDocument,
): Promise<ProtocolFault[]> {
  const faults = [...checkProtocol(protocol), ...planContrastFaults(protocol)];
  const ids = protocol.sites.map((site) => site.siteId);
  const known = new Set((await findSites(tx, ids)).map((site) => site.id));
  for (const [index, id] of ids.entries()) {
    if (known.has(id)) continue;
    const message = `There is no site ${id}`;
    faults.push({ pointer: `/sites/${index}/siteId`, code: 'unknown-site', message });
  }
  return faults;
}
