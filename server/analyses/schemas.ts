import { z } from 'zod';
import { ROLES } from '#platform/call.ts';
import { pageOf } from '#platform/paging.ts';

export const ANALYSIS_STATES = ['queued', 'running', 'succeeded', 'failed', 'cancelled'] as const;
export type AnalysisState = (typeof ANALYSIS_STATES)[number];

/** In lower case, as ids are kept and compared. */
export const AnalysisParams = z.strictObject({ analysisId: z.uuid().toLowerCase() });

/** 128 bits in hexadecimal; a seed of the analysis has nothing to do with the allocation secret. */
export const Seed = z.string().regex(/^[0-9a-f]{32}$/, '32 hexadecimal digits, in lower case');

export const RequestAnalysisBody = z
  .strictObject({
    seed: Seed.optional().describe(
      'Seed of whatever the analysis draws at random, 128 bits in hexadecimal; made when absent',
    ),
  })
  .meta({ id: 'RequestAnalysisBody' });
export type RequestAnalysisBody = z.infer<typeof RequestAnalysisBody>;

/** Who asked, by role and ids; the same as in the audit entry of the request. */
export const Requester = z
  .strictObject({
    role: z.enum([...ROLES, 'service']),
    tokenId: z.uuid().nullable(),
    accountId: z.uuid().nullable(),
    stationId: z.uuid().nullable(),
    operator: z.string().nullable(),
  })
  .meta({ id: 'Requester' });

export const AnalysisResponse = z
  .strictObject({
    id: z.uuid(),
    studyId: z.uuid(),
    protocolVersion: z.int().describe('The registered version whose plan is run'),
    state: z.enum(ANALYSIS_STATES),
    stage: z.string().describe('What is being done, in plain words'),
    progress: z.number().min(0).max(1),
    seed: Seed,
    requestedBy: Requester,
    requestedAt: z.iso.datetime(),
    startedAt: z.iso.datetime().nullable(),
    finishedAt: z.iso.datetime().nullable(),
    cancelRequested: z.boolean(),
    failure: z.string().nullable().describe('Why it failed; never holds a measured value'),
    reportId: z.uuid().nullable().describe('The filed report, once the analysis has succeeded'),
  })
  .meta({ id: 'Analysis' });
export type AnalysisResponse = z.infer<typeof AnalysisResponse>;
export const AnalysisPage = pageOf(AnalysisResponse).meta({ id: 'AnalysisPage' });

export const AnalysisEvents = z
  .string()
  .describe(
    'Server-sent events. `progress` comes at once and whenever something changed; `ended` comes ' +
      'once, when the analysis has succeeded, failed or been cancelled, and closes the stream. ' +
      'The data of each is an Analysis as JSON. Lines beginning with a colon keep the ' +
      'connection open.',
  );
