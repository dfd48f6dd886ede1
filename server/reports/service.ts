import { createHash } from 'node:crypto';
import { actorOf, type Call } from '#platform/call.ts';
import {
  type Database,
  type RecordsTransaction,
  recordsExecutor,
  sqlExecutor,
} from '#platform/database.ts';
import { cutPage, decodeCursor, NUMBER_POSITION, type PageQuery } from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { Requester } from '#server/analyses/schemas.ts';
import { engineVersion } from '#server/analyses/service.ts';
import { appendEntry } from '#server/audit/log.ts';
import { findVisibleStudy, requireVisibleStudy } from '#server/studies/service.ts';
import { recomputeOneAtATime } from './recompute.ts';
import type { RecomputationResponse, ReportResponse, ReportSummaryResponse } from './schemas.ts';
import * as store from './store.ts';

export { fileReport } from './file-report.ts';

export type ReportsService = ReturnType<typeof createReportsService>;

/** Reading filed reports and proving them. Reports are filed by `fileReport`, never changed. */
export function createReportsService(database: Database) {
  const { records } = database;
  const recomputed = recomputeOneAtATime(database);

  return {
    /** @throws {ProblemError} `not-found` */
    listReports: async (call: Call, studyId: string, query: PageQuery) => {
      await requireVisibleStudy(recordsExecutor(records), call.principal, studyId);
      const cursor = decodeCursor(query.cursor, NUMBER_POSITION);
      const before = cursor === null ? null : Number(cursor);
      const rows = await store.selectReports(records, { studyId, before, limit: query.limit });
      return cutPage(rows, query.limit, (row) => String(row.number), summaryResponse);
    },

    /** @throws {ProblemError} `not-found`, `report-altered` */
    getReport: async (call: Call, reportId: string): Promise<ReportResponse> => {
      const row = await requireIntactReport(records, call, reportId);
      return { ...summaryResponse(row), body: JSON.parse(row.body) };
    },

    /** The exact bytes that were filed. @throws {ProblemError} `not-found`, `report-altered` */
    getReportBody: async (call: Call, reportId: string) => {
      const row = await requireIntactReport(records, call, reportId);
      return { text: row.body, sha256: row.sha256 };
    },

    /** @throws {ProblemError} `not-found`, `report-altered` */
    getReportPage: async (call: Call, reportId: string) => {
      const row = await requireIntactReport(records, call, reportId);
      return { text: row.page, sha256: row.pageSha256 };
    },

    /**
     * Computes a filed report again from its protocol, snapshot and seed, in a thread, one at a
     * time in this process, and compares the bytes. Audit `report-recomputed`.
     *
     * @throws {ProblemError} `not-found`; `snapshot-erased` when a participant was erased since;
     *   `report-altered` when protocol or snapshot are no longer what the report was made from
     */
    recompute: async (call: Call, reportId: string): Promise<RecomputationResponse> => {
      const row = await requireReport(records, call, reportId);
      const now = await recomputed(row);
      const result: RecomputationResponse = {
        same: now.body === row.body && now.sha256 === row.sha256,
        sha256: now.sha256,
        filedSha256: row.sha256,
        pageSame: now.page === row.page && now.pageSha256 === row.pageSha256,
        engineVersion: engineVersion(),
        filedEngineVersion: row.engineVersion,
      };
      await database.inSqlTransaction((tx) =>
        appendEntry(sqlExecutor(tx), {
          chain: row.studyId,
          actor: actorOf(call),
          action: 'report-recomputed',
          subject: row.id,
          details: { number: row.number, same: result.same, sha256: result.sha256 },
          at: call.now,
        }),
      );
      return result;
    },
  };
}

/** @throws {ProblemError} `not-found` when there is none, or the caller may not see its study */
async function requireReport(tx: RecordsTransaction, call: Call, id: string) {
  const row = await store.selectReport(tx, id);
  const study =
    row === null ? null : await findVisibleStudy(recordsExecutor(tx), call.principal, row.studyId);
  if (row === null || study === null) {
    throw new ProblemError('not-found', `There is no report ${id} here.`);
  }
  return row;
}

/**
 * The database refuses to change a report; its administrators could still force it. What is served
 * is hashed again first, which costs milliseconds.
 */
async function requireIntactReport(tx: RecordsTransaction, call: Call, id: string) {
  const row = await requireReport(tx, call, id);
  if (sha256Of(row.body) === row.sha256 && sha256Of(row.page) === row.pageSha256) return row;
  throw new ProblemError(
    'report-altered',
    `Report ${row.number} as stored does not have the SHA-256 it was filed under.`,
  );
}

function sha256Of(text: string): string {
  return createHash('sha256').update(text, 'utf8').digest('hex');
}

function summaryResponse(row: store.ReportEnvelope): ReportSummaryResponse {
  return {
    id: row.id,
    studyId: row.studyId,
    number: row.number,
    createdAt: row.createdAt.toISOString(),
    requestedBy: Requester.parse(JSON.parse(row.requestedBy)),
    analysisId: row.analysisId,
    snapshotId: row.snapshotId,
    protocolVersion: row.protocolVersion,
    protocolSha256: row.protocolSha256,
    snapshotSha256: row.snapshotSha256,
    engineVersion: row.engineVersion,
    seed: row.seed,
    sha256: row.sha256,
    pageSha256: row.pageSha256,
  };
}
