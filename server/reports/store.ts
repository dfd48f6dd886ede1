import type { RecordsTransaction, SqlTransaction } from '#platform/database.ts';

export interface ReportEnvelope {
  readonly id: string;
  readonly studyId: string;
  readonly number: number;
  readonly analysisId: string;
  readonly snapshotId: string;
  readonly protocolVersion: number;
  readonly protocolSha256: string;
  readonly snapshotSha256: string;
  readonly engineVersion: string;
  readonly seed: string;
  readonly sha256: string;
  readonly pageSha256: string;
  readonly requestedBy: string;
  readonly createdAt: Date;
}

export interface ReportRow extends ReportEnvelope {
  readonly body: string;
  readonly page: string;
}

/** Everything but the two long texts. */
const envelopeOnly = { body: true, page: true } as const;

export function selectReport(tx: RecordsTransaction, id: string): Promise<ReportRow | null> {
  return tx.report.findUnique({ where: { id } });
}

/** Newest first; `before` is the number that the page before ended with. */
export function selectReports(
  tx: RecordsTransaction,
  filter: { studyId: string; before: number | null; limit: number },
): Promise<ReportEnvelope[]> {
  return tx.report.findMany({
    where: {
      studyId: filter.studyId,
      ...(filter.before === null ? {} : { number: { lt: filter.before } }),
    },
    omit: envelopeOnly,
    orderBy: { number: 'desc' },
    take: filter.limit + 1,
  });
}

/**
 * Stores a report under the next number of its study. The caller holds the lock on the study, which
 * is what keeps the numbers without a gap.
 */
export async function insertReport(
  tx: SqlTransaction,
  row: Omit<ReportRow, 'number'>,
): Promise<number> {
  const rows = await tx<{ number: number }[]>`
    insert into reports (id, study_id, number, analysis_id, snapshot_id, protocol_version,
      protocol_sha256, snapshot_sha256, engine_version, seed, body, sha256, page, page_sha256,
      requested_by, created_at)
    values (${row.id}, ${row.studyId},
      (select coalesce(max(number), 0) + 1 from reports where study_id = ${row.studyId}),
      ${row.analysisId}, ${row.snapshotId}, ${row.protocolVersion}, ${row.protocolSha256},
      ${row.snapshotSha256}, ${row.engineVersion}, ${row.seed}, ${row.body}, ${row.sha256},
      ${row.page}, ${row.pageSha256}, ${row.requestedBy}, ${row.createdAt})
    returning number`;
  const number = rows[0]?.number;
  if (number === undefined) throw new Error('The report was not stored.');
  return number;
}
