import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { SERVICE_ACTOR } from '#platform/call.ts';
import { type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { uuidv7 } from '#platform/ids.ts';
import type { ReportToFile } from '#server/analyses/service.ts';
import { appendEntry } from '#server/audit/log.ts';
import * as store from './store.ts';

/**
 * Stores a report under the next number of its study, in the caller's transaction, which holds the
 * lock on the study. Audit `report-filed`. The database refuses a second report of an analysis.
 */
export async function fileReport(tx: SqlTransaction, report: ReportToFile): Promise<void> {
  const { computed } = report;
  const id = uuidv7();
  const number = await store.insertReport(tx, {
    id,
    studyId: report.studyId,
    analysisId: report.analysisId,
    snapshotId: report.snapshotId,
    protocolVersion: report.protocolVersion,
    protocolSha256: report.protocolSha256,
    snapshotSha256: report.snapshotSha256,
    engineVersion: computed.engineVersion,
    seed: report.seed,
    body: computed.body,
    sha256: computed.sha256,
    page: computed.page,
    pageSha256: computed.pageSha256,
    requestedBy: canonicalJson({ ...report.requestedBy }),
    createdAt: report.at,
  });
  await appendEntry(sqlExecutor(tx), {
    chain: report.studyId,
    actor: SERVICE_ACTOR,
    action: 'report-filed',
    subject: id,
    details: {
      analysisId: report.analysisId,
      bodySha256: computed.sha256,
      engineVersion: computed.engineVersion,
      number,
      pageSha256: computed.pageSha256,
      protocolSha256: report.protocolSha256,
      protocolVersion: report.protocolVersion,
      requestedBy: { ...report.requestedBy },
      seed: report.seed,
      snapshotSha256: report.snapshotSha256,
    },
    at: report.at,
  });
}
