import { hexOfBytes } from '#core/hashing/digest.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type Executor, recordsExecutor, sqlState } from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import {
  cutPage,
  decodeCursor,
  NUMBER_POSITION,
  type PageQuery,
  UUID_POSITION,
} from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry, commitTo } from '#server/audit/log.ts';
import { checkDraft, getDraft, putDraft } from './drafts.ts';
import { ProtocolDocument } from './protocol-document.ts';
import { registerProtocol } from './registration.ts';
import {
  type CreateStudyBody,
  type PutDraftBody,
  type RegisterProtocolBody,
  type StateChangeBody,
  StudyResponse,
  type VersionResponse,
} from './schemas.ts';
import { schemePreview } from './scheme-preview.ts';
import * as store from './store.ts';
import {
  findVisibleStudy,
  lockVisibleStudy,
  requireVisibleStudy,
  STUDY_STATES,
  type Study,
  type StudyState,
  studyReach,
} from './visibility.ts';

export {
  type RegisteredProtocol,
  readRegisteredProtocol,
  registeredProtocol,
} from './registered-protocol.ts';
export {
  findVisibleStudy,
  lockStudy,
  lockVisibleStudy,
  requireStudy,
  requireVisibleStudy,
  type Study,
  type StudyState,
} from './visibility.ts';

export type StudiesService = ReturnType<typeof createStudiesService>;

/** Studies, their protocols and their states. */
export function createStudiesService(database: Database) {
  const change = (call: Call, studyId: string, body: StateChangeBody, rule: StateChange) =>
    changeState(database, call, studyId, body, rule);
  return {
    /** A study without a protocol, owned by the lead's lab. Audit event `study-created`. */
    createStudy: (call: Call, body: CreateStudyBody) => createStudy(database, call, body),

    listStudies: async (call: Call, query: PageQuery) => {
      const after = decodeCursor(query.cursor, UUID_POSITION);
      const rows = await store.selectStudies(database.records, {
        ...studyReach(call.principal),
        after,
        limit: query.limit,
      });
      return cutPage(rows, query.limit, (row) => row.id, studyResponse);
    },

    /** @throws {ProblemError} `not-found` */
    getStudy: (call: Call, studyId: string) =>
      database.inRecordsTransaction(async (tx) =>
        studyResponse(await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId)),
      ),

    getDraft: (call: Call, studyId: string) => getDraft(database, call, studyId),

    putDraft: (call: Call, studyId: string, body: PutDraftBody) =>
      putDraft(database, call, studyId, body),

    checkDraft: (call: Call, studyId: string) => checkDraft(database, call, studyId),

    registerProtocol: (call: Call, studyId: string, body: RegisterProtocolBody) =>
      registerProtocol(database, call, studyId, body),

    listVersions: (call: Call, studyId: string, query: PageQuery) =>
      listVersions(database, call, studyId, query),

    getVersion: (call: Call, studyId: string, number: number) =>
      getVersion(database, call, studyId, number),

    previewScheme: schemePreview,

    /** Nobody new is taken until enrolment is resumed. Audit event `study-paused`. */
    pauseStudy: (call: Call, studyId: string, body: StateChangeBody) =>
      change(call, studyId, body, { from: ['enrolling'], to: 'paused', action: 'study-paused' }),

    /** Audit event `study-resumed`. */
    resumeStudy: (call: Call, studyId: string, body: StateChangeBody) =>
      change(call, studyId, body, { from: ['paused'], to: 'enrolling', action: 'study-resumed' }),

    /** Ends enrolment for good; those under way may finish. Audit event `study-closed`. */
    closeStudy: (call: Call, studyId: string, body: StateChangeBody) =>
      change(call, studyId, body, {
        from: ['enrolling', 'paused'],
        to: 'closed',
        action: 'study-closed',
      }),

    getAllocationSecret: (call: Call, studyId: string) =>
      revealAllocationSecret(database, call, studyId),

    /** Whether the caller may see the study: the audit service asks before it shows a chain. */
    maySeeStudy: (call: Call, studyId: string) =>
      database.inRecordsTransaction(
        async (tx) =>
          (await findVisibleStudy(recordsExecutor(tx), call.principal, studyId)) !== null,
      ),
  };
}

/** The sites of a study by id; one that a later version left out has target 0. */
export function studySites(executor: Executor, studyId: string) {
  return store.selectStudySites(executor, studyId);
}

/**
 * The numbers of the next slot: in the site's list and in the study's order of issue. The caller
 * holds the lock of the study, see `lockVisibleStudy`.
 */
export function takeSlotNumbers(
  executor: Executor,
  studyId: string,
  siteId: string,
): Promise<{ number: number; issueNumber: number }> {
  return store.updateSlotNumbers(executor, studyId, siteId);
}

/** The allocation secret, for the rule that hands out sequences and for its replay alone. */
export async function allocationSecretOf(executor: Executor, studyId: string): Promise<Uint8Array> {
  const secret = await store.selectSecret(executor, studyId);
  if (secret === null) throw new Error(`The study ${studyId} has no allocation secret.`);
  return secret;
}

async function createStudy(database: Database, call: Call, body: CreateStudyBody) {
  const { labId } = call.principal;
  if (labId === null) throw new ProblemError('not-permitted', 'A study is owned by a lab.');
  try {
    return await database.inRecordsTransaction((tx) => {
      const executor = recordsExecutor(tx);
      return once(executor, call, {
        parse: (stored) => StudyResponse.parse(stored),
        work: async () => {
          const study = { id: uuidv7(), labId, name: body.name, createdAt: call.now };
          const row = await store.insertStudy(tx, study);
          await appendEntry(executor, {
            chain: study.id,
            actor: actorOf(call),
            action: 'study-created',
            subject: study.id,
            details: { labId },
            at: call.now,
          });
          return { status: 201, body: studyResponse(row) };
        },
      });
    });
  } catch (error) {
    if (sqlState(error) !== '23505') throw error;
    throw new ProblemError('already-exists', `The lab has a study “${body.name}” already.`);
  }
}

function listVersions(database: Database, call: Call, studyId: string, query: PageQuery) {
  return database.inRecordsTransaction(async (tx) => {
    await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId);
    const after = Number(decodeCursor(query.cursor, NUMBER_POSITION) ?? '0');
    const rows = await store.selectVersions(tx, { studyId, after, limit: query.limit });
    return cutPage(rows, query.limit, (row) => String(row.number), versionSummary);
  });
}

/** @throws {ProblemError} `not-found` */
function getVersion(
  database: Database,
  call: Call,
  studyId: string,
  number: number,
): Promise<VersionResponse> {
  return database.inRecordsTransaction(async (tx) => {
    await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId);
    const row = await store.selectVersion(tx, studyId, number);
    if (row === null) {
      throw new ProblemError('not-found', `The study has no registered version ${number}.`);
    }
    const protocol = ProtocolDocument.parse(JSON.parse(row.document));
    return { ...versionSummary(row), protocol };
  });
}

interface StateChange {
  readonly from: readonly StudyState[];
  readonly to: StudyState;
  readonly action: string;
}

/** @throws {ProblemError} `not-found`, `wrong-state` */
function changeState(
  database: Database,
  call: Call,
  studyId: string,
  body: StateChangeBody,
  { from, to, action }: StateChange,
) {
  return database.inRecordsTransaction(async (tx) => {
    const executor = recordsExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    return await once(executor, call, {
      parse: (stored) => StudyResponse.parse(stored),
      work: async () => {
        if (!from.includes(study.state)) {
          throw new ProblemError(
            'wrong-state',
            `The study is ${study.state}; this needs one that is ${from.join(' or ')}.`,
          );
        }
        const closing = to === 'closed' ? { closedAt: call.now } : {};
        const row = await store.updateStudyState(tx, studyId, { state: to, ...closing });
        const owner = { studyId, participantId: null };
        const reason =
          body.reason === undefined ? null : await commitTo(executor, body.reason, owner);
        await appendEntry(executor, {
          chain: studyId,
          actor: actorOf(call),
          action,
          subject: studyId,
          details: { reason },
          at: call.now,
        });
        return { status: 200, body: studyResponse(row) };
      },
    });
  });
}

/**
 * The allocation secret of a closed study: there is no coming slot left that it could give away.
 * Audit event `allocation-secret-revealed`, each time.
 *
 * @throws {ProblemError} `not-found`, `wrong-state` before the study is closed
 */
function revealAllocationSecret(database: Database, call: Call, studyId: string) {
  return database.inRecordsTransaction(async (tx) => {
    const executor = recordsExecutor(tx);
    const study = await lockVisibleStudy(executor, call.principal, studyId);
    if (study.state !== 'closed' || study.secretHash === null) {
      throw new ProblemError('wrong-state', 'The secret is kept until the study is closed.');
    }
    const secret = hexOfBytes(await allocationSecretOf(executor, studyId));
    await appendEntry(executor, {
      chain: studyId,
      actor: actorOf(call),
      action: 'allocation-secret-revealed',
      subject: studyId,
      details: {},
      at: call.now,
    });
    return { secret, secretHash: study.secretHash };
  });
}

function studyResponse(row: Omit<Study, 'state'> & { state: string }): StudyResponse {
  const state = STUDY_STATES.find((known) => known === row.state);
  if (state === undefined) throw new Error(`The study ${row.id} is in an unknown state.`);
  const { id, labId, name, currentVersion, secretHash } = row;
  return {
    id,
    labId,
    name,
    state,
    currentVersion,
    secretHash,
    createdAt: row.createdAt.toISOString(),
    closedAt: row.closedAt?.toISOString() ?? null,
  };
}

function versionSummary(row: {
  studyId: string;
  number: number;
  sha256: string | null;
  reason: string | null;
  registeredAt: Date | null;
}) {
  const { studyId, number, sha256, reason, registeredAt } = row;
  if (sha256 === null || registeredAt === null) {
    throw new Error(`Version ${number} of the study ${studyId} was registered without a hash.`);
  }
  return { studyId, number, sha256, reason, registeredAt: registeredAt.toISOString() };
}
