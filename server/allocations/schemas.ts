import { z } from 'zod';
import { pageOf } from '#platform/paging.ts';
import { text, writtenText } from '#platform/text.ts';
import { ConditionResponse, Reason, StudyId, Washout } from '#server/studies/schemas.ts';

export { StudyParams } from '#server/studies/schemas.ts';

/** Looser than a code is, so that a contact detail is refused as one and not as a wrong form. */
const Code = text(200)
  .min(1)
  .describe('Pseudonymous code: 1 to 40 letters, digits, hyphens, underscores; case is ignored');

export const ParticipantParams = z.strictObject({
  studyId: StudyId,
  code: text(200).min(1).describe('Code or id of the participant'),
});

const Stratum = z
  .record(text(200), text(200))
  .describe('Level key by between factor key, one for each between factor of the protocol');

export const ArrivalBody = z
  .discriminatedUnion('kind', [
    z.strictObject({
      kind: z.literal('new'),
      code: Code.optional().describe('When absent, the service issues one with a check character'),
      stratum: Stratum.optional().describe('Absent when the protocol has no between factors'),
    }),
    z.strictObject({ kind: z.literal('returning'), code: Code }),
  ])
  .meta({ id: 'ArrivalBody' });
export type ArrivalBody = z.infer<typeof ArrivalBody>;

const ParticipantName = z.strictObject({ id: z.uuid(), code: z.string() });

export const ArrivalResponse = z
  .strictObject({
    participant: ParticipantName,
    siteId: z.uuid(),
    slotNumber: z.int().describe('Place in the list of the site, from 1'),
    stratum: z.string().describe('Level keys joined by a full stop; `all` without between factors'),
    protocolVersion: z.int().describe('The version under which the participant takes part'),
    arrivedAt: z.iso.datetime().describe('First arrival'),
    replacement: z.boolean().describe('Whether the slot was taken over after a withdrawal'),
    washout: Washout,
    periods: z
      .array(
        z.strictObject({
          period: z.int().describe('From 1'),
          visit: z.int().describe('From 1'),
          condition: ConditionResponse,
          startedAt: z.iso.datetime().nullable(),
          completedAt: z.iso.datetime().nullable(),
        }),
      )
      .describe('The sequence, by period'),
  })
  .meta({ id: 'Arrival' });
export type ArrivalResponse = z.infer<typeof ArrivalResponse>;

export const DuePeriodResponse = z
  .strictObject({
    participant: ParticipantName,
    state: z
      .enum(['due', 'too-early', 'too-late', 'finished'])
      .describe('due: may start now; too-early: the washout has not passed; too-late: its maximum'),
    period: z.int().nullable().describe('The first period not started; null when finished'),
    visit: z.int().nullable(),
    condition: ConditionResponse.nullable(),
    dueFrom: z.iso.datetime().nullable().describe('Null for no bound'),
    dueUntil: z.iso.datetime().nullable().describe('Null for no bound'),
    washout: Washout,
    judgedAt: z.iso.datetime(),
  })
  .meta({ id: 'DuePeriod' });
export type DuePeriodResponse = z.infer<typeof DuePeriodResponse>;

export const DEVIATIONS = ['out-of-turn', 'too-early', 'too-late'] as const;
export type Deviation = (typeof DEVIATIONS)[number];

const ReportedTime = z.iso
  .datetime({ offset: true })
  .describe('When it really was, for a station that was offline; now when absent');

export const PeriodStartBody = z
  .strictObject({
    period: z.int().min(1).max(100_000),
    startedAt: ReportedTime.optional(),
    deviation: z
      .strictObject({ reason: Reason })
      .optional()
      .describe('Needed to start a period out of turn, too early or too late; kept as a deviation'),
  })
  .meta({ id: 'PeriodStartBody' });
export type PeriodStartBody = z.infer<typeof PeriodStartBody>;

export const PeriodStartResponse = z
  .strictObject({
    participantId: z.uuid(),
    period: z.int(),
    visit: z.int(),
    condition: ConditionResponse,
    startedAt: z.iso.datetime(),
    deviations: z.array(z.enum(DEVIATIONS)),
  })
  .meta({ id: 'PeriodStart' });
export type PeriodStartResponse = z.infer<typeof PeriodStartResponse>;

export const WITHDRAWAL_REASONS = [
  'own-wish',
  'unwell',
  'safety',
  'no-show',
  'equipment',
  'schedule',
  'other',
] as const;

export const WithdrawalBody = z
  .strictObject({
    reasonCode: z.enum(WITHDRAWAL_REASONS),
    periodReached: z
      .int()
      .min(0)
      .max(100_000)
      .describe('The last period that was begun; 0 when none was'),
    note: writtenText(2000).optional().describe('Free text; the log holds a commitment to it'),
    withdrawnAt: ReportedTime.optional(),
  })
  .meta({ id: 'WithdrawalBody' });
export type WithdrawalBody = z.infer<typeof WithdrawalBody>;

export const VoidBody = z.strictObject({ reason: Reason }).meta({ id: 'VoidArrivalBody' });
export type VoidBody = z.infer<typeof VoidBody>;

const Ending = z
  .discriminatedUnion('kind', [
    z.strictObject({
      kind: z.literal('withdrawn'),
      at: z.iso.datetime(),
      reasonCode: z.enum(WITHDRAWAL_REASONS),
      periodReached: z.int(),
    }),
    z.strictObject({ kind: z.literal('void'), at: z.iso.datetime() }),
  ])
  .meta({ id: 'ParticipantEnding' });

export const ParticipantResponse = z
  .strictObject({
    id: z.uuid(),
    code: z.string().nullable().describe('Null once the check-in was voided or the code erased'),
    siteId: z.uuid(),
    slotNumber: z.int(),
    stratum: z.string(),
    protocolVersion: z.int(),
    arrivedAt: z.iso.datetime(),
    replacement: z.boolean(),
    ending: Ending.nullable().describe('Null while the participant takes part, and when finished'),
    erasedAt: z.iso.datetime().nullable(),
    sequence: z
      .array(z.string())
      .nullable()
      .describe('Condition keys by period; null for roles that must not count sequences'),
    periods: z.array(
      z.strictObject({
        period: z.int(),
        startedAt: z.iso.datetime().nullable(),
        completedAt: z.iso.datetime().nullable(),
        deviations: z.array(z.enum(DEVIATIONS)),
      }),
    ),
  })
  .meta({ id: 'Participant' });
export type ParticipantResponse = z.infer<typeof ParticipantResponse>;
export const ParticipantPage = pageOf(ParticipantResponse).meta({ id: 'ParticipantPage' });

export const BalanceQuery = z.strictObject({
  protocolVersion: z.coerce
    .number()
    .int()
    .min(1)
    .max(1_000_000)
    .optional()
    .describe('The version in force when absent: balance is kept within one version'),
});

const counts = {
  planned: z.array(z.int()).describe('Slots issued, by sequence'),
  completed: z.array(z.int()).describe('Participants who completed every period, by sequence'),
};

export const BalanceResponse = z
  .strictObject({
    protocolVersion: z.int(),
    conditions: z.array(ConditionResponse),
    sequences: z
      .array(z.array(z.string()))
      .describe('Condition keys by period; counts by sequence are in this order'),
    cells: z
      .array(z.strictObject({ siteId: z.uuid(), stratum: z.string(), ...counts }))
      .describe('Site × stratum: planned counts differ by at most one under the policy balanced'),
    sites: z.array(
      z.strictObject({
        siteId: z.uuid(),
        targetEnrolment: z.int(),
        slotsIssued: z.int().describe('Under all versions'),
        ...counts,
      }),
    ),
    conditionByPeriod: z.array(
      z.strictObject({
        condition: z.string(),
        planned: z.array(z.int()).describe('By period'),
        completed: z.array(z.int()).describe('By period; of those who withdrew later too'),
      }),
    ),
    orderedPairs: z.array(
      z.strictObject({
        first: z.string(),
        second: z.string(),
        planned: z.int(),
        completed: z.int(),
      }),
    ),
  })
  .meta({ id: 'Balance' });
export type BalanceResponse = z.infer<typeof BalanceResponse>;

export const ReplayResponse = z
  .strictObject({
    agrees: z.boolean(),
    verified: z.int().describe('Slots that agree before the first difference'),
    slotsIssued: z.int(),
    secretHash: z.string(),
    firstDifference: z
      .strictObject({
        kind: z.enum([
          'secret',
          'issue-number',
          'slot-number',
          'protocol-version',
          'sequence',
          'draws',
          'slot-count',
        ]),
        issueNumber: z.int().nullable(),
        expected: z.string(),
        recorded: z.string(),
      })
      .nullable(),
  })
  .meta({ id: 'AllocationReplay' });
export type ReplayResponse = z.infer<typeof ReplayResponse>;
