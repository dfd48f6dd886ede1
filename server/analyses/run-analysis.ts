import type { Logger } from 'pino';
import { type Actor, SERVICE_ACTOR } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import type { TakenJob } from '#platform/queue.ts';
import { appendEntry } from '#server/audit/log.ts';
import { lockStudy } from '#server/studies/service.ts';
import type { ComputationInput, ComputedReport } from './computation.ts';
import { computeInThread } from './compute-in-thread.ts';
import { type Fault, faultOf } from './fault.ts';
import { freezeSnapshot } from './freeze-snapshot.ts';
import { requesterOf } from './requester.ts';
import { loadComputationInput } from './snapshots.ts';
import * as store from './store.ts';

/** How often a running analysis writes its progress down and reads whether it is to stop. */
const PROGRESS_MS = 300;

/** Share of the progress that freezing and filing take; the plan has what lies between. */
const FROZEN = 0.1;
const COMPUTED = 0.95;

/** A finished computation, to be stored for good. */
export interface ReportToFile {
  readonly studyId: string;
  readonly analysisId: string;
  readonly snapshotId: string;
  readonly snapshotSha256: string;
  readonly protocolVersion: number;
  readonly protocolSha256: string;
  readonly seed: string;
  readonly requestedBy: Actor;
  readonly computed: ComputedReport;
  readonly at: Date;
}

export interface RunnerOptions {
  readonly database: Database;
  readonly logger: Logger;
  /** Numbers and stores the report, in the transaction that ends the analysis. */
  readonly fileReport: (tx: SqlTransaction, report: ReportToFile) => Promise<void>;
}

export interface AnalysisRunner {
  /** Does one job to its end; throws when it should be tried again. */
  run(job: TakenJob): Promise<void>;
  /** Ends an analysis whose job ran out of tries. */
  giveUp(job: TakenJob): Promise<void>;
}

type Taken = store.TakenAnalysis;

/**
 * The worker's side of an analysis. A job may come more than once, after a crash or because a
 * worker was thought dead: the snapshot is frozen once and every run starts from it, and the
 * transaction that files the report is the one that ends the analysis, under a lock on its row.
 */
export function createAnalysisRunner(options: RunnerOptions): AnalysisRunner {
  const { database, logger } = options;
  return {
    run: async (job) => {
      const taken = await take(database, job.subjectId);
      if (taken === null) {
        logger.info({ analysis: job.subjectId }, 'nothing left to do for this analysis');
        return;
      }
      try {
        await runTaken(options, taken, job.signal);
      } catch (error) {
        const fault = faultOf(error);
        logger.error({ analysis: taken.id, triesBefore: job.triesBefore, ...fault }, 'a try broke');
        // The queue keeps what is thrown in a table, where nobody would erase a quoted value.
        throw new Error(`The try ended with ${fault.name} ${fault.code ?? ''}`.trimEnd());
      }
    },

    giveUp: async (job) => {
      const failure =
        'The analysis was tried several times and no try came to an end. ' +
        'The log of the service says why.';
      await end(database, job.subjectId, 'failed', failure);
    },
  };
}

/** Marks the analysis as running; null when it has ended, or ends here since it was cancelled. */
async function take(database: Database, id: string): Promise<Taken | null> {
  const taken = await database.inSqlTransaction(async (tx) => {
    const analysis = await store.lockAnalysis(tx, id);
    if (analysis === null || !isOpen(analysis)) return null;
    await store.updateRunning(tx, id, new Date());
    return analysis;
  });
  if (taken?.cancelRequested !== true) return taken;
  await end(database, id, 'cancelled', null);
  return null;
}

async function runTaken(options: RunnerOptions, taken: Taken, signal: AbortSignal): Promise<void> {
  const { database, logger } = options;
  const progress = { fraction: 0, stage: 'freezing the data' };
  const tell = () =>
    database.inSqlTransaction((tx) => store.updateProgress(tx, taken.id, progress));
  await tell();
  const snapshotId = taken.snapshotId ?? (await freezeSnapshot(database, taken));
  if (snapshotId === null) return await end(database, taken.id, 'cancelled', null);
  const input = await loadComputationInput(database, { ...taken, snapshotId });

  progress.fraction = FROZEN;
  const computation = computeInThread(input, {
    signal,
    onProgress: (fraction, stage) => {
      progress.fraction = FROZEN + fraction * (COMPUTED - FROZEN);
      progress.stage = stage;
    },
  });
  const telling = repeatedly(async () => {
    const { cancelRequested, ended } = await tell();
    if (cancelRequested || ended) computation.requestStop();
  });
  const outcome = await computation.outcome.finally(() => telling.stop());

  switch (outcome.kind) {
    case 'computed':
      return await file(options, taken, { snapshotId, input, computed: outcome.report });
    case 'stopped':
      return await end(database, taken.id, 'cancelled', null);
    case 'erased':
      return await end(database, taken.id, 'failed', erasedMeanwhile(outcome.participants));
    case 'altered':
      return await end(database, taken.id, 'failed', alteredMeanwhile(outcome.what));
    case 'fault':
      // The plan is a pure function of what is frozen: another try would end in the same fault.
      logger.error({ analysis: taken.id, ...outcome.fault }, 'the computation broke');
      return await end(database, taken.id, 'failed', computationFailure(outcome.fault));
  }
}

/** Files the report and ends the analysis, or leaves both when somebody else ended it first. */
async function file(
  options: RunnerOptions,
  taken: Taken,
  done: { snapshotId: string; input: ComputationInput; computed: ComputedReport },
): Promise<void> {
  const filed = await options.database.inSqlTransaction(async (tx) => {
    await lockStudy(sqlExecutor(tx), taken.studyId);
    const now = await store.lockAnalysis(tx, taken.id);
    if (now === null || !isOpen(now)) return true;
    if (now.cancelRequested) return false;
    const at = new Date();
    const stage = 'report filed';
    await store.updateEnded(tx, taken.id, {
      state: 'succeeded',
      stage,
      failure: null,
      finishedAt: at,
    });
    await options.fileReport(tx, {
      studyId: taken.studyId,
      analysisId: taken.id,
      snapshotId: done.snapshotId,
      snapshotSha256: done.input.snapshotSha256,
      protocolVersion: taken.protocolVersion,
      protocolSha256: done.input.protocolSha256,
      seed: taken.seed,
      requestedBy: requesterOf(taken),
      computed: done.computed,
      at,
    });
    return true;
  });
  if (!filed) await end(options.database, taken.id, 'cancelled', null);
}

/** Ends an analysis without a report. Audit `analysis-failed` or `analysis-cancelled`. */
async function end(
  database: Database,
  id: string,
  state: 'failed' | 'cancelled',
  failure: string | null,
): Promise<void> {
  await database.inSqlTransaction(async (tx) => {
    const analysis = await store.lockAnalysis(tx, id);
    if (analysis === null || !isOpen(analysis)) return;
    const finishedAt = new Date();
    await store.updateEnded(tx, id, { state, stage: state, failure, finishedAt });
    await appendEntry(sqlExecutor(tx), {
      chain: analysis.studyId,
      actor: SERVICE_ACTOR,
      action: `analysis-${state}`,
      subject: id,
      details: failure === null ? {} : { failure },
      at: finishedAt,
    });
  });
}

function isOpen(analysis: Taken): boolean {
  return analysis.state === 'queued' || analysis.state === 'running';
}

function erasedMeanwhile(participants: number): string {
  return (
    `The data of ${participants} participants were erased after they had been frozen and before ` +
    'the analysis was done. Request it again.'
  );
}

function alteredMeanwhile(what: string): string {
  return `The ${what} is no longer what was frozen: somebody changed it in the database.`;
}

/** Says what broke without the fault's own message, which may quote a measured value. */
function computationFailure(fault: Fault): string {
  return (
    `The computation broke with a ${fault.name}. That is a fault of the service; ` +
    'its log names the place under the id of this analysis.'
  );
}

/** Does `work` again and again with pauses, one at a time; a fault of one round is not the end. */
function repeatedly(work: () => Promise<void>): { stop(): Promise<void> } {
  let stopped = false;
  let round: Promise<void> = Promise.resolve();
  const timer = setInterval(() => {
    round = round.then(() => (stopped ? undefined : work())).catch(() => undefined);
  }, PROGRESS_MS);
  return {
    stop: async () => {
      stopped = true;
      clearInterval(timer);
      await round;
    },
  };
}
