import { hash } from 'node:crypto';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { ProblemError } from '#platform/problems.ts';
import { markPeriodsBegun, markPeriodsCompleted } from '#server/allocations/service.ts';
import { appendEntry } from '#server/audit/log.ts';
import { registeredProtocol, requireVisibleStudy, type Study } from '#server/studies/service.ts';
import { readRows, type UploadMediaType } from './read-rows.ts';
import type { Acceptance, UploadResponse } from './schemas.ts';
import { UploadResponse as UploadResponseSchema } from './schemas.ts';
import { type Spool, spoolBody } from './spool.ts';
import * as store from './store-uploads.ts';
import { UploadRun } from './take-rows.ts';
import { uploadResponse } from './upload-views.ts';

/** What an upload request brings. */
export interface UploadRequest {
  readonly studyId: string;
  readonly acceptance: Acceptance;
  readonly mediaType: UploadMediaType;
  readonly body: AsyncIterable<Buffer>;
}

/** What is checked and stored together: so many rows, or fewer when they are long. */
const BATCH = { rows: 1000, characters: 4_000_000 };

/** A million rows of the usual size; more come as several uploads. */
export const UPLOAD_BYTES_MAX = 512 * 1024 * 1024;

/** A check-in that is voided while its rows come in makes the upload begin again, so many times. */
const TRIES = 3;

/**
 * Takes an upload for the site of the call. The body is received first, then read, checked and
 * stored in one transaction, one upload of a study after the other.
 *
 * All-or-nothing stores no row when one has a fault, and still keeps the upload and its refused
 * rows. Audit event `trials-uploaded` or `upload-refused`, with counts and a hash over the
 * commitments of what was stored.
 *
 * @param inTurn runs the work when it is this upload's turn
 * @throws {ProblemError} `not-found`, `wrong-state` before the first registration,
 *   `invalid-request` for a body that cannot be read as rows at all, `payload-too-large`,
 *   `idempotency-key-reused`, `upload-refused` naming the first rows at fault
 */
export async function uploadTrials(
  database: Database,
  call: Call,
  request: UploadRequest,
  inTurn: <T>(work: () => Promise<T>) => Promise<T>,
): Promise<UploadResponse> {
  await database.inSqlTransaction((tx) => requireOpenStudy(tx, call, request.studyId));
  const spool = await spoolBody(request.body, UPLOAD_BYTES_MAX);
  try {
    const response = await inTurn(() => taken(database, call, request, spool));
    if (response.outcome === 'refused') throw refusal(response);
    return response;
  } finally {
    await spool.close();
  }
}

async function taken(
  database: Database,
  call: Call,
  request: UploadRequest,
  spool: Spool,
): Promise<UploadResponse> {
  for (let tries = 1; ; tries += 1) {
    try {
      return await database.inSqlTransaction((tx) => takeOnce(tx, call, request, spool));
    } catch (error) {
      const voided = error instanceof ProblemError && error.problem === 'participant-ended';
      if (!voided || tries === TRIES) throw error;
    }
  }
}

/**
 * The kept answer says nothing of the bytes, since their hash could be guessed back to a value:
 * what tells whether a repeat has the same bytes is the hash of the upload, which can be erased.
 */
async function takeOnce(
  tx: SqlTransaction,
  call: Call,
  request: UploadRequest,
  spool: Spool,
): Promise<UploadResponse> {
  const executor = sqlExecutor(tx);
  const study = await requireOpenStudy(tx, call, request.studyId);
  const answer = await once(executor, call, {
    parse: (stored) => UploadResponseSchema.parse(stored),
    keep: (response) => ({ ...response, faults: [], sha256: null }),
    work: async () => ({ status: 201, body: await takeRows(tx, call, study, request, spool) }),
  });
  if (!answer.repeated) return answer.body;
  const first = await store.selectUpload(tx, { ...answer.body, studyId: study.id });
  if (first === null) throw new Error(`The upload ${answer.body.id} is gone.`);
  if (first.sha256 === spool.sha256 && first.mediaType === request.mediaType) {
    return await uploadResponse(tx, first);
  }
  throw new ProblemError(
    'idempotency-key-reused',
    first.sha256 === null
      ? 'Whether this is the same upload can no longer be told, since a participant was erased. ' +
          'Send it with a new key: rows that are stored already count as repeated.'
      : 'This key came with another upload before. Use a new key for a new upload.',
  );
}

async function takeRows(
  tx: SqlTransaction,
  call: Call,
  study: Study,
  request: UploadRequest,
  spool: Spool,
): Promise<UploadResponse> {
  const executor = sqlExecutor(tx);
  const upload = {
    id: uuidv7(),
    studyId: study.id,
    siteId: requireSite(call),
    tokenId: call.principal.tokenId,
    operator: call.operator,
    acceptance: request.acceptance,
    mediaType: request.mediaType,
    sha256: spool.sha256,
    receivedAt: call.now,
  };
  await store.lockTrials(tx, study.id);
  await store.insertUpload(tx, upload);
  const run = new UploadRun(tx, upload);
  const measures = await measuresOf(tx, study);
  const { mediaType } = request;
  try {
    for await (const rows of readRows(spool.read(), { mediaType, measures, batch: BATCH })) {
      await run.take(rows);
    }
  } finally {
    // Not even a rollback can be sent while rows are being written.
    await Promise.allSettled([run.finish()]);
  }
  await run.finish();
  const isRefused = request.acceptance === 'all-or-nothing' && run.counts.refused > 0;
  if (isRefused) await run.takeBack();
  const { begun, completed } = run.periods();
  await markPeriodsBegun(tx, begun);
  await markPeriodsCompleted(
    tx,
    completed.map((period) => ({ ...period, at: call.now })),
  );
  await store.updateUploadCounts(tx, upload.id, run.counts);
  await appendEntry(executor, {
    chain: study.id,
    actor: actorOf(call),
    action: isRefused ? 'upload-refused' : 'trials-uploaded',
    subject: upload.id,
    details: {
      ...run.counts,
      acceptance: upload.acceptance,
      commitmentsSha256: isRefused ? hash('sha256', '') : run.commitmentsSha256(),
      siteId: upload.siteId,
    },
    at: call.now,
  });
  return await uploadResponse(tx, { ...upload, ...run.counts });
}

/** @throws {ProblemError} `not-found`, `wrong-state`; a closed study still takes what was begun */
async function requireOpenStudy(tx: SqlTransaction, call: Call, studyId: string): Promise<Study> {
  const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
  if (study.currentVersion !== null) return study;
  throw new ProblemError('wrong-state', 'The study has no registered protocol yet.');
}

function requireSite(call: Call): string {
  const { siteId } = call.principal;
  if (siteId === null) throw new Error('Only stations upload, and each belongs to a site.');
  return siteId;
}

/** Measures of every version: a column of one may stand empty for participants of another. */
async function measuresOf(tx: SqlTransaction, study: Study): Promise<Set<string>> {
  const keys = new Set<string>();
  for (let version = 1; version <= (study.currentVersion ?? 0); version += 1) {
    const { protocol } = await registeredProtocol(sqlExecutor(tx), study.id, version);
    for (const { key } of protocol.measures) keys.add(key);
  }
  return keys;
}

function refusal(response: UploadResponse): ProblemError {
  const { id, studyId, refused } = response;
  return new ProblemError(
    'upload-refused',
    `${refused} of ${response.rows} rows have faults, so none was stored. The refused rows are ` +
      `kept under the upload ${id}.`,
    {
      faults: response.faults,
      headers: { location: `/v1/studies/${studyId}/uploads/${id}` },
    },
  );
}
