import type { Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import {
  cutPage,
  decodeCursor,
  NUMBER_POSITION,
  type PageQuery,
  UUID_POSITION,
} from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { requireVisibleStudy } from '#server/studies/service.ts';
import {
  StoredFaults,
  type UploadFault,
  type UploadResponse,
  type UploadSummary,
} from './schemas.ts';
import * as store from './store-uploads.ts';

/** Refused rows whose faults an answer shows by itself. */
const SHOWN_ROWS = 100;

/** Uploads that the caller may see, a page at a time. @throws {ProblemError} `not-found` */
export function listUploads(database: Database, call: Call, studyId: string, query: PageQuery) {
  return database.inSqlTransaction(async (tx) => {
    const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    const rows = await store.selectUploads(tx, {
      studyId: study.id,
      siteId: call.principal.siteId,
      after: decodeCursor(query.cursor, UUID_POSITION),
      limit: query.limit + 1,
    });
    return cutPage(rows, query.limit, (row) => row.id, uploadSummary);
  });
}

/** @throws {ProblemError} `not-found` */
export function getUpload(database: Database, call: Call, studyId: string, uploadId: string) {
  return database.inSqlTransaction(async (tx) =>
    uploadResponse(tx, await requireUpload(tx, call, studyId, uploadId)),
  );
}

/** What an upload refused, as it came, a page at a time. @throws {ProblemError} `not-found` */
export function listRefusedRows(
  database: Database,
  call: Call,
  place: { readonly studyId: string; readonly uploadId: string },
  query: PageQuery,
) {
  return database.inSqlTransaction(async (tx) => {
    const upload = await requireUpload(tx, call, place.studyId, place.uploadId);
    const rows = await store.selectRefusedRows(tx, {
      uploadId: upload.id,
      after: Number(decodeCursor(query.cursor, NUMBER_POSITION) ?? '0'),
      limit: query.limit + 1,
    });
    return cutPage(
      rows,
      query.limit,
      ({ row }) => String(row),
      ({ row, raw, faults }) => ({ row, raw, faults: StoredFaults.parse(JSON.parse(faults)) }),
    );
  });
}

/** An upload as answered, with the faults of its first refused rows. */
export async function uploadResponse(
  tx: SqlTransaction,
  upload: store.UploadRecord,
): Promise<UploadResponse> {
  const filter = { uploadId: upload.id, after: 0, limit: SHOWN_ROWS };
  const refused = upload.refused === 0 ? [] : await store.selectRefusedRows(tx, filter);
  const faults: UploadFault[] = refused.flatMap(({ row, faults: stored }) =>
    StoredFaults.parse(JSON.parse(stored)).map((fault) => ({ row, ...fault })),
  );
  return { ...uploadSummary(upload), faults };
}

async function requireUpload(
  tx: SqlTransaction,
  call: Call,
  studyId: string,
  uploadId: string,
): Promise<store.UploadRecord> {
  const study = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
  const { siteId } = call.principal;
  const upload = await store.selectUpload(tx, { studyId: study.id, siteId, id: uploadId });
  if (upload !== null) return upload;
  throw new ProblemError('not-found', `There is no upload ${uploadId} here.`);
}

function uploadSummary(upload: store.UploadRecord): UploadSummary {
  const { id, studyId, siteId, operator, acceptance, mediaType, sha256 } = upload;
  const { rows, accepted, repeated, refused, flagged, deviations } = upload;
  return {
    id,
    studyId,
    siteId,
    operator,
    acceptance,
    mediaType,
    sha256,
    receivedAt: upload.receivedAt.toISOString(),
    outcome: acceptance === 'all-or-nothing' && refused > 0 ? 'refused' : 'stored',
    rows,
    accepted,
    repeated,
    refused,
    flagged,
    deviations,
  };
}
