import { randomBytes } from 'node:crypto';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type RecordsTransaction, recordsExecutor } from '#platform/database.ts';
import type { EventStream } from '#platform/event-stream.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { cutPage, decodeCursor, type PageQuery, UUID_POSITION } from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import type { JobSender } from '#platform/queue.ts';
import { appendEntry } from '#server/audit/log.ts';
import { findVisibleStudy, requireVisibleStudy } from '#server/studies/service.ts';
import { requesterOf } from './requester.ts';
import { AnalysisResponse, type AnalysisState, type RequestAnalysisBody } from './schemas.ts';
import * as store from './store.ts';
import { createAnalysisWatch } from './watch.ts';

export type { ComputedReport } from './computation.ts';
export { computeInThread } from './compute-in-thread.ts';
export { engineVersion } from './engine.ts';
export type { ReportToFile } from './run-analysis.ts';
export { forgetSnapshotParticipant, loadComputationInput } from './snapshots.ts';

export type AnalysesService = ReturnType<typeof createAnalysesService>;

export interface AnalysesOptions {
  readonly database: Database;
  readonly queue: JobSender;
  /** A followed analysis could not be read; its followers are told at the next reading. */
  readonly onWatchFault: (error: unknown) => void;
}

const OPEN_STATES: readonly AnalysisState[] = ['queued', 'running'];

/** Requesting analyses and watching them; a worker runs them (`run-analysis.ts`). */
export function createAnalysesService({ database, queue, onWatchFault }: AnalysesOptions) {
  const { records } = database;
  const watch = createAnalysisWatch({
    read: async (ids) => (await store.selectAnalysesByIds(records, ids)).map(analysisResponse),
    onFault: onWatchFault,
  });

  return {
    /**
     * Queues an analysis by the current protocol version; row, job and audit entry
     * `analysis-requested` are made in one transaction.
     *
     * @throws {ProblemError} `not-found`, `wrong-state` when no protocol is registered
     */
    requestAnalysis: (call: Call, studyId: string, body: RequestAnalysisBody) =>
      database.inRecordsTransaction((tx) =>
        once(recordsExecutor(tx), call, {
          parse: (stored) => AnalysisResponse.parse(stored),
          work: async () => {
            const study = await requireVisibleStudy(recordsExecutor(tx), call.principal, studyId);
            if (study.currentVersion === null) {
              throw new ProblemError('wrong-state', 'The study has no registered protocol yet.');
            }
            const row = await insertRequested(tx, call, {
              studyId,
              protocolVersion: study.currentVersion,
              seed: body.seed ?? randomBytes(16).toString('hex'),
            });
            await queue.enqueue(recordsExecutor(tx), 'run-analysis', row.id);
            return { status: 202, body: analysisResponse(row) };
          },
        }),
      ),

    /** @throws {ProblemError} `not-found` */
    listAnalyses: async (call: Call, studyId: string, query: PageQuery) => {
      await requireVisibleStudy(recordsExecutor(records), call.principal, studyId);
      const after = decodeCursor(query.cursor, UUID_POSITION);
      const filter = { studyId, after, limit: query.limit };
      const rows = await store.selectAnalyses(records, filter);
      return cutPage(rows, query.limit, (row) => row.id, analysisResponse);
    },

    /** @throws {ProblemError} `not-found` */
    getAnalysis: async (call: Call, analysisId: string) =>
      analysisResponse(await requireAnalysis(records, call, analysisId)),

    /**
     * Cancels. A queued analysis ends here (audit `analysis-cancelled`) and its job finds nothing
     * left to do; of a running one the worker is told (audit `analysis-cancellation-requested`).
     *
     * @throws {ProblemError} `not-found`, `analysis-finished`
     */
    cancelAnalysis: (call: Call, analysisId: string) =>
      database.inRecordsTransaction(async (tx) => {
        const before = await requireAnalysis(tx, call, analysisId);
        if (before.state === 'running' && before.cancelRequested) return analysisResponse(before);
        await cancel(tx, call, before);
        return analysisResponse(await requireAnalysis(tx, call, analysisId));
      }),

    /** Streams an analysis, as it stands and as it changes, until it ends or the stream closes. */
    follow: (analysis: AnalysisResponse, stream: EventStream): void => {
      const tell = (now: AnalysisResponse) => {
        const ended = !OPEN_STATES.includes(now.state);
        stream.send(ended ? 'ended' : 'progress', now);
        if (ended) stream.close();
      };
      tell(analysis);
      if (OPEN_STATES.includes(analysis.state)) stream.onClose(watch.follow(analysis, tell));
    },
  };
}

async function insertRequested(
  tx: RecordsTransaction,
  call: Call,
  request: { studyId: string; protocolVersion: number; seed: string },
): Promise<store.AnalysisRow> {
  const actor = actorOf(call);
  const row = await store.insertAnalysis(tx, {
    ...request,
    id: uuidv7(),
    stage: 'waiting for a worker',
    requestedBy: canonicalJson({ ...actor }),
    requestedAt: call.now,
  });
  await appendEntry(recordsExecutor(tx), {
    chain: request.studyId,
    actor,
    action: 'analysis-requested',
    subject: row.id,
    details: { protocolVersion: request.protocolVersion, seed: request.seed },
    at: call.now,
  });
  return row;
}

async function cancel(
  tx: RecordsTransaction,
  call: Call,
  analysis: store.AnalysisRow,
): Promise<void> {
  const wasQueued = await store.updateStateFrom(tx, analysis.id, 'queued', {
    state: 'cancelled',
    stage: 'cancelled',
    cancelRequested: true,
    finishedAt: call.now,
  });
  const wasRunning =
    !wasQueued &&
    (await store.updateStateFrom(tx, analysis.id, 'running', { cancelRequested: true }));
  if (!wasQueued && !wasRunning) {
    throw new ProblemError('analysis-finished', `The analysis ${analysis.id} has ended already.`);
  }
  await appendEntry(recordsExecutor(tx), {
    chain: analysis.studyId,
    actor: actorOf(call),
    action: wasQueued ? 'analysis-cancelled' : 'analysis-cancellation-requested',
    subject: analysis.id,
    details: {},
    at: call.now,
  });
}

/** @throws {ProblemError} `not-found` when there is none, or the caller may not see its study */
async function requireAnalysis(tx: RecordsTransaction, call: Call, id: string) {
  const row = await store.selectAnalysis(tx, id);
  const study =
    row === null ? null : await findVisibleStudy(recordsExecutor(tx), call.principal, row.studyId);
  if (row === null || study === null) {
    throw new ProblemError('not-found', `There is no analysis ${id} here.`);
  }
  return row;
}

function analysisResponse(row: store.AnalysisRow): AnalysisResponse {
  return AnalysisResponse.parse({
    id: row.id,
    studyId: row.studyId,
    protocolVersion: row.protocolVersion,
    state: row.state,
    stage: row.stage,
    progress: row.progress,
    seed: row.seed,
    requestedBy: requesterOf(row),
    requestedAt: row.requestedAt.toISOString(),
    startedAt: row.startedAt?.toISOString() ?? null,
    finishedAt: row.finishedAt?.toISOString() ?? null,
    cancelRequested: row.cancelRequested,
    failure: row.failure,
    reportId: row.report?.id ?? null,
  });
}
