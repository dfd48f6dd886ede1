import type { Call } from '#platform/call.ts';
import type { Database } from '#platform/database.ts';
import type { PageQuery } from '#platform/paging.ts';
import { correctTrial } from './corrections.ts';
import { eraseParticipant, type ForgetParticipant } from './erasure.ts';
import { type ExportMediaType, exportTrials } from './exports.ts';
import type { CorrectionBody, ErasureBody, ExportQuery } from './schemas.ts';
import { turns } from './turns.ts';
import { getUpload, listRefusedRows, listUploads } from './upload-views.ts';
import { type UploadRequest, uploadTrials } from './uploads.ts';

export type { ForgetParticipant } from './erasure.ts';
export { trialRecordsForSnapshot } from './snapshot-records.ts';

export type TrialsService = ReturnType<typeof createTrialsService>;

export interface TrialsOptions {
  readonly database: Database;
  /** What the features above hold of a participant and forget when one is erased. */
  readonly onErase: readonly ForgetParticipant[];
}

/** Uploads that one process takes at once; each holds a batch of rows and a connection. */
const UPLOADS_AT_ONCE = 2;

/** Uploads, corrections, export and erasure of trial records. */
export function createTrialsService({ database, onErase }: TrialsOptions) {
  const inTurn = turns(UPLOADS_AT_ONCE);
  return {
    uploadTrials: (call: Call, request: UploadRequest) =>
      uploadTrials(database, call, request, inTurn),

    listUploads: (call: Call, studyId: string, query: PageQuery) =>
      listUploads(database, call, studyId, query),

    getUpload: (call: Call, studyId: string, uploadId: string) =>
      getUpload(database, call, studyId, uploadId),

    listRefusedRows: (
      call: Call,
      place: { readonly studyId: string; readonly uploadId: string },
      query: PageQuery,
    ) => listRefusedRows(database, call, place, query),

    correctTrial: (call: Call, studyId: string, body: CorrectionBody) =>
      correctTrial(database, call, studyId, body),

    exportTrials: (
      call: Call,
      studyId: string,
      options: { readonly mediaType: ExportMediaType } & ExportQuery,
    ) => exportTrials(database, call, studyId, options),

    eraseParticipant: (
      call: Call,
      place: { readonly studyId: string; readonly code: string },
      body: ErasureBody,
    ) => eraseParticipant(database, call, place, body, onErase),
  };
}
