import { z } from 'zod';
import { pageOf } from '#platform/paging.ts';
import { writtenText } from '#platform/text.ts';
import { Factor, ProtocolDocument, SchemeChoice } from './protocol-document.ts';
import { STUDY_STATES } from './visibility.ts';

export {
  Factor,
  PolicyChoice,
  ProtocolDocument,
  SchemeChoice,
  Washout,
} from './protocol-document.ts';

/** In lower case, as ids are kept and compared. */
export const StudyId = z.uuid().toLowerCase();

export const StudyParams = z.strictObject({ studyId: StudyId });
export const VersionParams = z.strictObject({
  studyId: StudyId,
  number: z.coerce.number().int().min(1).max(1_000_000),
});

/** Why somebody did something; free text, so the audit log holds only a commitment to it. */
export const Reason = writtenText(2000);

export const CreateStudyBody = z
  .strictObject({
    name: writtenText(200).describe('Working name, unique in the lab; the protocol has the title'),
  })
  .meta({ id: 'CreateStudyBody' });
export type CreateStudyBody = z.infer<typeof CreateStudyBody>;

export const StudyResponse = z
  .strictObject({
    id: z.uuid(),
    labId: z.uuid().describe('The lab that owns the study'),
    name: z.string(),
    state: z
      .enum(STUDY_STATES)
      .describe(
        'draft: nothing registered yet; enrolling; paused: nobody new is taken for a while; ' +
          'closed: nobody new is taken any more, those under way may finish',
      ),
    currentVersion: z.int().nullable().describe('The registered protocol version in force'),
    secretHash: z
      .string()
      .nullable()
      .describe('SHA-256 of the allocation secret, published when the study is registered'),
    createdAt: z.iso.datetime(),
    closedAt: z.iso.datetime().nullable(),
  })
  .meta({ id: 'Study' });
export type StudyResponse = z.infer<typeof StudyResponse>;
export const StudyPage = pageOf(StudyResponse).meta({ id: 'StudyPage' });

const Revision = z.int().min(0).max(1_000_000_000);

export const PutDraftBody = z
  .strictObject({
    revision: Revision.describe('Of the draft that this one replaces; 0 when there is none'),
    protocol: ProtocolDocument,
  })
  .meta({ id: 'PutProtocolDraftBody' });
export type PutDraftBody = z.infer<typeof PutDraftBody>;

export const DraftRevisionResponse = z
  .strictObject({
    number: z.int().describe('The version that the draft becomes when it is registered'),
    revision: z.int(),
  })
  .meta({ id: 'ProtocolDraftRevision' });

export const DraftResponse = z
  .strictObject({
    number: z.int().describe('The version that the draft becomes when it is registered'),
    revision: z.int(),
    createdAt: z.iso.datetime(),
    protocol: ProtocolDocument,
  })
  .meta({ id: 'ProtocolDraft' });
export type DraftResponse = z.infer<typeof DraftResponse>;

export const DraftCheckResponse = z
  .strictObject({
    revision: z.int(),
    registrable: z.boolean(),
    faults: z.array(
      z.strictObject({
        pointer: z.string().describe('JSON pointer (RFC 6901) into the protocol document'),
        code: z.string(),
        message: z.string(),
      }),
    ),
  })
  .meta({ id: 'ProtocolDraftCheck' });

export const RegisterProtocolBody = z
  .strictObject({
    revision: Revision.min(1).describe('The revision of the draft that is to be registered'),
    reason: Reason.optional().describe('Why the protocol is amended; needed from version 2 on'),
  })
  .meta({ id: 'RegisterProtocolBody' });
export type RegisterProtocolBody = z.infer<typeof RegisterProtocolBody>;

const versionFields = {
  studyId: z.uuid(),
  number: z.int(),
  sha256: z.string().describe('Of the canonical JSON (RFC 8785) of `protocol`, hexadecimal'),
  reason: z.string().nullable(),
  registeredAt: z.iso.datetime(),
};

export const VersionSummary = z.strictObject(versionFields).meta({ id: 'ProtocolVersionSummary' });
export const VersionPage = pageOf(VersionSummary).meta({ id: 'ProtocolVersionPage' });

export const VersionResponse = z
  .strictObject({ ...versionFields, protocol: ProtocolDocument })
  .meta({ id: 'ProtocolVersion' });
export type VersionResponse = z.infer<typeof VersionResponse>;

export const StateChangeBody = z
  .strictObject({ reason: Reason.optional() })
  .meta({ id: 'StateChangeBody' });
export type StateChangeBody = z.infer<typeof StateChangeBody>;

export const SecretResponse = z
  .strictObject({
    secret: z.string().describe('The allocation secret, 32 bytes in hexadecimal'),
    secretHash: z.string().describe('SHA-256 of its bytes, as published at registration'),
  })
  .meta({ id: 'AllocationSecret' });

export const SchemePreviewBody = z
  .strictObject({
    withinFactors: z.array(Factor).max(100),
    scheme: SchemeChoice,
    periods: z.int().min(1).max(1000).describe('Number of periods in every sequence'),
    targetEnrolments: z
      .array(z.int().min(0).max(1_000_000))
      .max(1000)
      .default([])
      .describe('For each, how many participants make whole blocks'),
  })
  .meta({ id: 'SchemePreviewBody' });
export type SchemePreviewBody = z.infer<typeof SchemePreviewBody>;

export const ConditionResponse = z
  .strictObject({
    key: z.string().describe('Level keys in factor order, joined by a full stop'),
    label: z.string(),
  })
  .meta({ id: 'Condition' });

const EffectEfficiency = z
  .strictObject({
    efficiency: z
      .number()
      .nullable()
      .describe(
        'Average variance of the pairwise comparisons in an ideal layout with the same ' +
          'replication over that of these sequences; null when some comparison cannot be estimated',
      ),
    notEstimable: z
      .array(z.strictObject({ first: z.string(), second: z.string() }))
      .describe('Pairs of conditions that these sequences cannot compare'),
  })
  .meta({ id: 'EffectEfficiency' });

export const SchemePreviewResponse = z
  .strictObject({
    conditions: z.array(ConditionResponse),
    sequences: z.array(
      z.strictObject({
        number: z.int().describe('From 1, in the order of the scheme'),
        conditions: z.array(z.string()).describe('Condition keys by period'),
        labels: z.array(z.string()).describe('Condition labels by period'),
      }),
    ),
    participantsPerBlock: z.int().describe('One block is the whole set of sequences'),
    conditionByPeriod: z.array(
      z.strictObject({
        condition: z.string(),
        counts: z.array(z.int()).describe('By period: sequences that present it there'),
      }),
    ),
    orderedPairs: z.array(
      z.strictObject({
        first: z.string(),
        second: z.string(),
        count: z.int().describe('How often `second` comes immediately after `first`'),
      }),
    ),
    uniformOnPeriods: z.boolean().describe('Every condition equally often in every period'),
    carryoverBalanced: z
      .boolean()
      .describe('Every ordered pair of different conditions equally often, none after itself'),
    stronglyCarryoverBalanced: z
      .boolean()
      .describe('Every ordered pair equally often, a condition after itself included'),
    uniformWithinSequences: z
      .boolean()
      .describe('Every sequence presents every condition equally often'),
    lags: z
      .array(
        z.strictObject({
          lag: z.int().describe('Periods from the first condition of the pair to the second'),
          balanced: z.boolean(),
          stronglyBalanced: z.boolean(),
        }),
      )
      .describe('Balance of ordered pairs at each distance; 1 is immediate succession'),
    efficiency: z
      .strictObject({
        direct: EffectEfficiency.describe('Conditions, no carryover in the model'),
        directAdjusted: EffectEfficiency.describe('Conditions, adjusted for carryover'),
        carryover: EffectEfficiency.describe('First-order carryover, adjusted for conditions'),
      })
      .describe('With participants and periods fixed; 1 is the best there is for conditions'),
    targets: z.array(
      z.strictObject({
        targetEnrolment: z.int(),
        blocks: z.int().describe('Whole blocks for at least that many'),
        participants: z.int(),
        aboveTarget: z.int(),
      }),
    ),
  })
  .meta({ id: 'SchemePreview' });
export type SchemePreviewResponse = z.infer<typeof SchemePreviewResponse>;
