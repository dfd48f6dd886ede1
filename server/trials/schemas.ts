import { z } from 'zod';
import { pageOf } from '#platform/paging.ts';
import { text, writtenText } from '#platform/text.ts';
import { Reason, StudyId } from '#server/studies/schemas.ts';
import { NOTE_MAX, RECORD_ID_MAX } from './read-fields.ts';

export { StudyParams } from '#server/studies/schemas.ts';

export const UploadParams = z.strictObject({ studyId: StudyId, uploadId: z.uuid().toLowerCase() });

export const ErasureParams = z.strictObject({
  studyId: StudyId,
  code: z.string().min(1).max(200).describe('Code or id of the participant'),
});

export const ACCEPTANCES = ['all-or-nothing', 'valid-rows'] as const;
export type Acceptance = (typeof ACCEPTANCES)[number];

export const UploadQuery = z.strictObject({
  acceptance: z
    .enum(ACCEPTANCES)
    .default('all-or-nothing')
    .describe('What becomes of the rows without fault when others have faults'),
});

const Values = z
  .record(text(200), z.union([z.number(), z.boolean(), z.null()]))
  .describe('By measure key: a number, for binary measures true, false, 1 or 0; null is not given');

const Missing = z
  .record(text(200), text(200))
  .describe('Reason code by measure key, for each value that is not given: not-taken, equipment …');

const RecordedTime = z.iso
  .datetime({ offset: true })
  .describe('ISO 8601 with the offset from UTC; kept as it comes');

const Place = z.int().min(1);

/** Documents a row. Rows are read by `readFields`, which is many times faster. */
export const TrialRow = z
  .strictObject({
    participant: text(200).min(1).describe('Code of the participant; case is ignored'),
    period: Place.describe('From 1'),
    repetition: Place.describe('From 1 in the period'),
    condition: text(200).min(1).describe('Key of the condition as presented'),
    recordId: text(RECORD_ID_MAX).min(1).describe('Of the sender; unique in the study'),
    values: Values.optional(),
    missing: Missing.optional(),
    startedAt: RecordedTime,
    endedAt: RecordedTime.nullable().optional(),
    note: text(NOTE_MAX).nullable().optional(),
  })
  .meta({
    id: 'TrialRow',
    description:
      'One trial record. Every measure of the protocol that is taken on this repetition has a ' +
      'value or a reason why it is missing.',
  });

/** The body of an upload by media type. It is streamed: nothing validates it as a whole. */
export const UPLOAD_BODY = {
  'application/json': { schema: z.array(TrialRow).describe('Rows') },
  'application/x-ndjson': { schema: z.string().describe('One TrialRow as JSON a line') },
  'text/csv': {
    schema: z
      .string()
      .describe(
        'RFC 4180, UTF-8, with a header: participant, period, repetition, condition, recordId, ' +
          'startedAt, if wanted endedAt and note, one column a measure key, and `missing.` with ' +
          'a measure key for its reason code. An empty field is not given.',
      ),
  },
} as const;

const UploadFault = z
  .strictObject({
    row: z.int().describe('Of the data, from 1'),
    pointer: z.string().describe('JSON pointer (RFC 6901) into the row, as a TrialRow'),
    code: z.string(),
    message: z.string(),
  })
  .meta({ id: 'UploadFault' });
export type UploadFault = z.infer<typeof UploadFault>;

const summary = {
  id: z.uuid(),
  studyId: z.uuid(),
  siteId: z.uuid(),
  operator: z.string().nullable(),
  acceptance: z.enum(ACCEPTANCES),
  mediaType: z.string(),
  sha256: z
    .string()
    .nullable()
    .describe('Of the bytes received; null once a participant of the study was erased'),
  receivedAt: z.iso.datetime(),
  outcome: z
    .enum(['stored', 'refused'])
    .describe('refused: all-or-nothing, and there were faults; only the refused rows are kept'),
  rows: z.int(),
  accepted: z.int().describe('Stored by this upload'),
  repeated: z.int().describe('Stored already, with the same content'),
  refused: z.int(),
  flagged: z.int().describe('Stored by this upload, and implausible'),
  deviations: z.int().describe('Stored by this upload under another condition than assigned'),
};

export const UploadSummary = z.strictObject(summary).meta({ id: 'UploadSummary' });
export type UploadSummary = z.infer<typeof UploadSummary>;
export const UploadPage = pageOf(UploadSummary).meta({ id: 'UploadPage' });

export const UploadResponse = z
  .strictObject({
    ...summary,
    faults: z.array(UploadFault).describe('Of the first refused rows; see refused-rows for all'),
  })
  .meta({ id: 'Upload' });
export type UploadResponse = z.infer<typeof UploadResponse>;

const RowFault = z
  .strictObject({ pointer: z.string(), code: z.string(), message: z.string() })
  .meta({ id: 'RowFault' });

export const RefusedRow = z
  .strictObject({
    row: z.int().describe('Of the data, from 1'),
    raw: z.string().nullable().describe('As it came; null once its participant was erased'),
    faults: z.array(RowFault),
  })
  .meta({ id: 'RefusedRow' });
export const RefusedRowPage = pageOf(RefusedRow).meta({ id: 'RefusedRowPage' });
export const StoredFaults = z.array(RowFault);

export const CorrectionBody = z
  .strictObject({
    participant: text(200).min(1).describe('Code of the participant'),
    period: Place,
    repetition: Place,
    values: Values.describe('All values of the record as it should be'),
    missing: Missing.optional().describe('All reasons for missing values as they should be'),
    condition: text(200).min(1).optional().describe('As it was when absent'),
    startedAt: RecordedTime.optional().describe('As it was when absent'),
    endedAt: RecordedTime.nullable().optional().describe('As it was when absent'),
    note: writtenText(NOTE_MAX).nullable().optional().describe('As it was when absent'),
    reason: Reason,
  })
  .meta({ id: 'TrialCorrectionBody' });
export type CorrectionBody = z.infer<typeof CorrectionBody>;

export const CorrectionResponse = z
  .strictObject({
    id: z.uuid().describe('Of the new version of the trial'),
    participantId: z.uuid(),
    period: z.int(),
    repetition: z.int(),
    version: z.int().describe('From 1; earlier versions stay'),
    condition: z.string(),
    deviation: z.boolean(),
    flags: z.array(z.string()),
    commitment: z.string().describe('Salted, to the corrected content'),
    correctedAt: z.iso.datetime(),
  })
  .meta({ id: 'TrialCorrection' });
export type CorrectionResponse = z.infer<typeof CorrectionResponse>;

export const EXPORT_VERSIONS = ['current', 'all'] as const;

export const ExportQuery = z.strictObject({
  versions: z
    .enum(EXPORT_VERSIONS)
    .default('current')
    .describe('all: with the versions that were corrected since'),
});
export type ExportQuery = z.infer<typeof ExportQuery>;

/** One line of an export as NDJSON. */
export const ExportedTrial = z
  .strictObject({
    participant: z.string().nullable().describe('Code; null for one who was erased or voided'),
    period: z.int(),
    repetition: z.int(),
    condition: z.string().describe('As presented'),
    recordId: z.string().nullable(),
    startedAt: z.string().nullable(),
    endedAt: z.string().nullable(),
    note: z.string().nullable(),
    values: z.record(z.string(), z.union([z.number(), z.boolean()])),
    missing: z.record(z.string(), z.string()),
    trialId: z.uuid(),
    participantId: z.uuid(),
    siteId: z.uuid(),
    stratum: z.string(),
    slotNumber: z.int(),
    protocolVersion: z.int(),
    assignedCondition: z.string(),
    deviation: z.boolean(),
    flags: z.array(z.string()),
    version: z.int(),
    current: z.boolean(),
    erased: z.boolean().describe('The participant was erased: the record stays as a tombstone'),
    uploadId: z.uuid().nullable().describe('Null for a correction'),
    receivedAt: z.iso.datetime(),
  })
  .meta({ id: 'ExportedTrial' });
export type ExportedTrial = z.infer<typeof ExportedTrial>;

/** Coded, since a free text about somebody who is erased would be personal data again. */
export const ERASURE_REASONS = [
  'participant-request',
  'consent-withdrawn',
  'retention-ended',
  'collected-by-mistake',
  'legal-duty',
] as const;

export const ErasureBody = z
  .strictObject({ reasonCode: z.enum(ERASURE_REASONS) })
  .meta({ id: 'ErasureBody' });
export type ErasureBody = z.infer<typeof ErasureBody>;

export const ErasureResponse = z
  .strictObject({
    participantId: z.uuid().describe('Of the tombstone, by which the log goes on naming it'),
    erasedAt: z.iso.datetime(),
  })
  .meta({ id: 'Erasure' });
export type ErasureResponse = z.infer<typeof ErasureResponse>;
