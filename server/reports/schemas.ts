import { z } from 'zod';
import { pageOf } from '#platform/paging.ts';
import { Requester, Seed } from '#server/analyses/schemas.ts';

/** In lower case, as ids are kept and compared. */
export const ReportParams = z.strictObject({ reportId: z.uuid().toLowerCase() });

const Sha256 = z.string().regex(/^[0-9a-f]{64}$/);

const envelope = {
  id: z.uuid(),
  studyId: z.uuid(),
  number: z.int().describe('From 1 in each study, without a gap'),
  createdAt: z.iso.datetime(),
  requestedBy: Requester,
  analysisId: z.uuid(),
  snapshotId: z.uuid(),
  protocolVersion: z.int(),
  protocolSha256: Sha256,
  snapshotSha256: Sha256,
  engineVersion: z.string(),
  seed: Seed,
  sha256: Sha256.describe('Of the exact bytes of the body'),
  pageSha256: Sha256.describe('Of the exact bytes of the page'),
};

export const ReportSummaryResponse = z.strictObject(envelope).meta({ id: 'ReportSummary' });
export type ReportSummaryResponse = z.infer<typeof ReportSummaryResponse>;
export const ReportPage = pageOf(ReportSummaryResponse).meta({ id: 'ReportPage' });

export const ReportResponse = z
  .strictObject({
    ...envelope,
    body: z
      .record(z.string(), z.unknown())
      .describe('What is hashed, as JSON; number, time and requester stand outside it'),
  })
  .meta({ id: 'Report' });
export type ReportResponse = z.infer<typeof ReportResponse>;

export const RecomputationResponse = z
  .strictObject({
    same: z.boolean().describe('Whether the bytes computed now are the bytes that were filed'),
    sha256: Sha256.describe('Of the body computed now'),
    filedSha256: Sha256.describe('As recorded when the report was filed'),
    pageSame: z.boolean(),
    engineVersion: z.string().describe('What computed it now'),
    filedEngineVersion: z.string(),
  })
  .meta({ id: 'Recomputation' });
export type RecomputationResponse = z.infer<typeof RecomputationResponse>;
