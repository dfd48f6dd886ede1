import type { RecordsTransaction, SqlTransaction } from '#platform/database.ts';
import type { AnalysisState } from './schemas.ts';

export interface AnalysisRow {
  readonly id: string;
  readonly studyId: string;
  readonly protocolVersion: number;
  readonly state: string;
  readonly stage: string;
  readonly progress: number;
  readonly seed: string;
  readonly requestedBy: string;
  readonly requestedAt: Date;
  readonly startedAt: Date | null;
  readonly finishedAt: Date | null;
  readonly cancelRequested: boolean;
  readonly failure: string | null;
  readonly report: { readonly id: string } | null;
}

const withReport = { report: { select: { id: true } } } as const;

export interface NewAnalysis {
  readonly id: string;
  readonly studyId: string;
  readonly protocolVersion: number;
  readonly stage: string;
  readonly seed: string;
  readonly requestedBy: string;
  readonly requestedAt: Date;
}

export function insertAnalysis(tx: RecordsTransaction, row: NewAnalysis): Promise<AnalysisRow> {
  const data = { ...row, state: 'queued', progress: 0 };
  return tx.analysis.create({ data, include: withReport });
}

export function selectAnalysis(tx: RecordsTransaction, id: string): Promise<AnalysisRow | null> {
  return tx.analysis.findUnique({ where: { id }, include: withReport });
}

export function selectAnalysesByIds(
  tx: RecordsTransaction,
  ids: readonly string[],
): Promise<AnalysisRow[]> {
  return tx.analysis.findMany({ where: { id: { in: [...ids] } }, include: withReport });
}

/** Newest first; `after` is the id that the page before ended with. */
export function selectAnalyses(
  tx: RecordsTransaction,
  filter: { studyId: string; after: string | null; limit: number },
): Promise<AnalysisRow[]> {
  return tx.analysis.findMany({
    where: {
      studyId: filter.studyId,
      ...(filter.after === null ? {} : { id: { lt: filter.after } }),
    },
    include: withReport,
    orderBy: { id: 'desc' },
    take: filter.limit + 1,
  });
}

/** Moves an analysis from one state to another; false when it was not in the first. */
export async function updateStateFrom(
  tx: RecordsTransaction,
  id: string,
  from: AnalysisState,
  change: { state?: AnalysisState; stage?: string; cancelRequested?: boolean; finishedAt?: Date },
): Promise<boolean> {
  const { count } = await tx.analysis.updateMany({ where: { id, state: from }, data: change });
  return count === 1;
}

/** What a worker needs to know of the analysis it took. */
export interface TakenAnalysis {
  readonly id: string;
  readonly studyId: string;
  readonly protocolVersion: number;
  readonly state: AnalysisState;
  readonly seed: string;
  readonly requestedBy: string;
  readonly cancelRequested: boolean;
  readonly snapshotId: string | null;
}

/** Locks the row until the transaction ends, so that two workers cannot end it differently. */
export async function lockAnalysis(tx: SqlTransaction, id: string): Promise<TakenAnalysis | null> {
  const rows = await tx<TakenAnalysis[]>`
    select id, study_id as "studyId", protocol_version as "protocolVersion", state, seed,
      requested_by as "requestedBy", cancel_requested as "cancelRequested",
      snapshot_id as "snapshotId"
    from analyses where id = ${id} for update`;
  return rows[0] ?? null;
}

export async function updateRunning(tx: SqlTransaction, id: string, now: Date): Promise<void> {
  await tx`
    update analyses set state = 'running', started_at = coalesce(started_at, ${now})
    where id = ${id}`;
}

export async function updateSnapshot(
  tx: SqlTransaction,
  id: string,
  snapshotId: string,
): Promise<void> {
  await tx`update analyses set snapshot_id = ${snapshotId} where id = ${id}`;
}

/**
 * Writes progress down and reads whether somebody asked to stop. Works on a running analysis only.
 */
export async function updateProgress(
  tx: SqlTransaction,
  id: string,
  progress: { fraction: number; stage: string },
): Promise<{ cancelRequested: boolean; ended: boolean }> {
  const rows = await tx<{ cancelRequested: boolean }[]>`
    update analyses set progress = ${progress.fraction}, stage = ${progress.stage}
    where id = ${id} and state = 'running' returning cancel_requested as "cancelRequested"`;
  return { cancelRequested: rows[0]?.cancelRequested ?? false, ended: rows[0] === undefined };
}

export async function updateEnded(
  tx: SqlTransaction,
  id: string,
  end: {
    readonly state: 'succeeded' | 'failed' | 'cancelled';
    readonly stage: string;
    readonly failure: string | null;
    readonly finishedAt: Date;
  },
): Promise<void> {
  await tx`
    update analyses set state = ${end.state}, stage = ${end.stage}, failure = ${end.failure},
      finished_at = ${end.finishedAt},
      progress = case when ${end.state} = 'succeeded' then 1 else progress end
    where id = ${id}`;
}
