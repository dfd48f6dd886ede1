import type { SqlTransaction } from '#platform/database.ts';
import { copyRow, copyRows } from './copy-text.ts';

export interface UploadCounts {
  readonly rows: number;
  readonly accepted: number;
  readonly repeated: number;
  readonly refused: number;
  readonly flagged: number;
  readonly deviations: number;
}

export interface UploadRecord extends UploadCounts {
  readonly id: string;
  readonly studyId: string;
  readonly siteId: string;
  readonly operator: string | null;
  readonly acceptance: 'all-or-nothing' | 'valid-rows';
  readonly mediaType: string;
  readonly sha256: string | null;
  readonly receivedAt: Date;
}

export interface RefusedRowRecord {
  readonly row: number;
  readonly raw: string | null;
  readonly faults: string;
}

export interface NewRefusedRow {
  readonly row: number;
  readonly participantId: string | null;
  readonly codeKey: string | null;
  readonly raw: string;
  readonly faults: string;
}

/** Uploads, corrections and erasures of one study go one after the other. */
export async function lockTrials(tx: SqlTransaction, studyId: string): Promise<void> {
  await tx`select pg_advisory_xact_lock(hashtextextended(${`trials of ${studyId}`}, 0))`;
}

/** Rows refer to their upload from the first on; its counts follow with `updateUploadCounts`. */
export async function insertUpload(
  tx: SqlTransaction,
  upload: Omit<UploadRecord, keyof UploadCounts> & { readonly tokenId: string },
): Promise<void> {
  const { id, studyId, siteId, tokenId, operator, acceptance, mediaType } = upload;
  await tx`
    insert into uploads (id, study_id, site_id, token_id, operator, acceptance, media_type, sha256,
      rows, accepted, repeated, refused, flagged, deviations, received_at)
    values (${id}, ${studyId}, ${siteId}, ${tokenId}, ${operator}, ${acceptance}, ${mediaType},
      ${upload.sha256}, 0, 0, 0, 0, 0, 0, ${upload.receivedAt})`;
}

export async function updateUploadCounts(
  tx: SqlTransaction,
  id: string,
  counts: UploadCounts,
): Promise<void> {
  const { rows, accepted, repeated, refused, flagged, deviations } = counts;
  await tx`
    update uploads set rows = ${rows}, accepted = ${accepted}, repeated = ${repeated},
      refused = ${refused}, flagged = ${flagged}, deviations = ${deviations} where id = ${id}`;
}

/** Text that PostgreSQL can keep: NUL, which it cannot, becomes the symbol for it, U+2400. */
export async function copyRefusedRows(
  tx: SqlTransaction,
  uploadId: string,
  rows: readonly NewRefusedRow[],
): Promise<void> {
  if (rows.length === 0) return;
  const copy = tx`
    copy refused_rows (upload_id, row, participant_id, code_key, raw, faults) from stdin`;
  const text = rows.map(({ row, participantId, codeKey, raw, faults }) =>
    copyRow([
      uploadId,
      String(row),
      participantId,
      codeKey,
      raw.replaceAll('\u0000', '\u2400').toWellFormed(),
      faults,
    ]),
  );
  await copyRows(copy, text.join(''));
}

function uploadColumns(tx: SqlTransaction) {
  return tx`
    id, study_id as "studyId", site_id as "siteId", operator, acceptance,
    media_type as "mediaType", sha256, rows, accepted, repeated, refused, flagged, deviations,
    received_at as "receivedAt"`;
}

/** @param siteId an upload of another site is none; null for those who see every site */
export async function selectUpload(
  tx: SqlTransaction,
  by: { readonly studyId: string; readonly siteId: string | null; readonly id: string },
): Promise<UploadRecord | null> {
  const rows = await tx<UploadRecord[]>`
    select ${uploadColumns(tx)} from uploads
    where study_id = ${by.studyId} and id = ${by.id}
      and (${by.siteId}::uuid is null or site_id = ${by.siteId}::uuid)`;
  return rows[0] ?? null;
}

export async function selectUploads(
  tx: SqlTransaction,
  filter: {
    readonly studyId: string;
    readonly siteId: string | null;
    readonly after: string | null;
    readonly limit: number;
  },
): Promise<UploadRecord[]> {
  const { studyId, siteId, after, limit } = filter;
  return await tx<UploadRecord[]>`
    select ${uploadColumns(tx)} from uploads
    where study_id = ${studyId} and (${siteId}::uuid is null or site_id = ${siteId}::uuid)
      and (${after}::uuid is null or id > ${after}::uuid)
    order by id limit ${limit}`;
}

export async function selectRefusedRows(
  tx: SqlTransaction,
  filter: { readonly uploadId: string; readonly after: number; readonly limit: number },
): Promise<RefusedRowRecord[]> {
  const { uploadId, after, limit } = filter;
  return await tx<RefusedRowRecord[]>`
    select row, raw, faults from refused_rows
    where upload_id = ${uploadId} and row > ${after} order by row limit ${limit}`;
}

/** What was refused of a participant, or of somebody not known yet under the same code. */
export async function eraseRefusedRows(
  tx: SqlTransaction,
  by: {
    readonly studyId: string;
    readonly participantId: string;
    readonly codeKey: string | null;
  },
): Promise<void> {
  await tx`
    update refused_rows set raw = null, code_key = null, faults = '[]'
    where participant_id = ${by.participantId}
      or (code_key = ${by.codeKey}
        and upload_id in (select id from uploads where study_id = ${by.studyId}))`;
}

export async function eraseUploadHashes(tx: SqlTransaction, studyId: string): Promise<void> {
  await tx`update uploads set sha256 = null where study_id = ${studyId} and sha256 is not null`;
}
