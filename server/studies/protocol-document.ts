import { z } from 'zod';
import { type Protocol, TWO_CONDITION_DESIGNS } from '#core/protocol/protocol.ts';
import { text } from '#platform/text.ts';

/**
 * The shape of a protocol document as it comes in and goes out. It is deliberately wider than what
 * can be registered: a draft is saved while it still has faults of substance, and those are named
 * all at once by the core's `checkProtocol`.
 */

const Key = text(200).describe('Lower-case words joined by hyphens');
const Label = text(200).describe('What people read');
const ListMax = 10_000;

const Hypothesis = z.strictObject({ key: Key, statement: text(4000) }).meta({ id: 'Hypothesis' });

const Level = z.strictObject({ key: Key, label: Label }).meta({ id: 'Level' });

export const Factor = z
  .strictObject({
    key: Key,
    label: Label,
    levels: z.array(Level).max(ListMax).describe('In order; at least two'),
  })
  .meta({ id: 'Factor' });

const CARRYOVER_BALANCED = [
  'complete-permutations',
  'williams',
  'orthogonal-latin-squares',
] as const;
const BASES = [...CARRYOVER_BALANCED, 'cyclic-latin-square'] as const;

const OrderConstraint = z
  .discriminatedUnion('kind', [
    z
      .strictObject({
        kind: z.enum(['never-in-periods', 'always-in-periods']),
        condition: Key,
        periods: z.array(z.int()).max(ListMax).describe('Period numbers from 1'),
      })
      .describe('The condition stands in none of these periods, or in these alone'),
    z
      .strictObject({
        kind: z.enum(['never-adjacent', 'never-in-order']),
        first: Key,
        second: Key,
      })
      .describe('Neither immediately after the other, or the second never after the first'),
    z
      .strictObject({ kind: z.literal('familiarisation-first'), condition: Key })
      .describe('The condition stands in period 1, and in no other'),
  ])
  .meta({ id: 'OrderConstraint', description: 'What an order must not do' });

export const SchemeChoice = z
  .discriminatedUnion('kind', [
    z.strictObject({ kind: z.enum(BASES) }).describe('Every condition once in each sequence'),
    z
      .strictObject({ kind: z.literal('mirrored'), base: z.enum(BASES) })
      .describe('Each sequence of the base followed by its mirror image'),
    z
      .strictObject({ kind: z.literal('extra-period'), base: z.enum(CARRYOVER_BALANCED) })
      .describe('Each sequence of the base with its last condition once more: strongly balanced'),
    z
      .strictObject({ kind: z.literal('two-conditions'), design: z.enum(TWO_CONDITION_DESIGNS) })
      .describe('Named by its sequences; a is the first condition'),
    z
      .strictObject({
        kind: z.literal('balanced-incomplete-blocks'),
        carryoverBalanced: z.boolean().describe('Whether immediate succession is balanced too'),
      })
      .describe(
        'Fewer periods than conditions; every two conditions meet in equally many sequences. ' +
          'With as many sequences as conditions it is a Youden square',
      ),
    z
      .strictObject({
        kind: z.literal('permutation-fraction'),
        squares: z.int().describe('Williams squares; pairs of them for odd numbers of conditions'),
      })
      .describe('A balanced fraction of the complete permutations'),
    z
      .strictObject({
        kind: z.literal('random-permutations'),
        count: z.int().describe('How many orders are drawn'),
        seed: text(100).describe('16 hexadecimal digits: the same seed gives the same orders'),
        generator: z
          .strictObject({ name: text(100), version: z.int() })
          .describe('What draws the orders: philox4x32-10, version 1'),
      })
      .describe('Orders drawn at random, each independently of the others'),
    z
      .strictObject({
        kind: z.literal('constrained-permutations'),
        constraints: z.array(OrderConstraint).max(ListMax),
      })
      .describe('Every order of the conditions that meets the constraints'),
    z
      .strictObject({
        kind: z.literal('nested'),
        blockedFactor: z.int().describe('Place among the within factors, from 1'),
        blocks: z.enum(BASES).describe('Orders of the blocks'),
        insideBlocks: z.enum(BASES).describe('Orders inside a block'),
      })
      .describe('The levels of one factor in blocks, the other factors counterbalanced inside'),
    z.strictObject({
      kind: z.literal('custom-list'),
      sequences: z
        .array(z.array(Key).max(ListMax))
        .max(ListMax)
        .describe('Condition keys by period, one row a sequence'),
    }),
  ])
  .meta({ id: 'SchemeChoice', description: 'Where the sequences come from' });

export const PolicyChoice = z
  .discriminatedUnion('kind', [
    z
      .strictObject({ kind: z.literal('balanced') })
      .describe('In each site × stratum, counts by sequence differ by at most one'),
    z
      .strictObject({
        kind: z.literal('permuted-blocks'),
        multiples: z
          .array(z.int())
          .max(ListMax)
          .describe('How often each sequence stands in a block: one of these, drawn for each'),
      })
      .describe('In each site × stratum, counts differ by at most the largest of the multiples'),
    z
      .strictObject({
        kind: z.literal('minimisation'),
        imbalance: z
          .enum(['variance', 'range'])
          .describe('How the imbalance of one margin is measured'),
        weights: z
          .strictObject({
            site: z.int(),
            study: z.int(),
            factors: z
              .array(z.strictObject({ factor: Key, weight: z.int() }))
              .max(ListMax)
              .describe('One for every between factor'),
          })
          .describe('Whole numbers from 0: how much the evenness of each margin counts'),
        bestProbability: z
          .number()
          .describe('How likely the best sequence is taken; above 0.5, at most 1'),
      })
      .describe('Site, factors and study are kept even, each by its weight; no bound is certain'),
  ])
  .meta({ id: 'PolicyChoice', description: 'The rule by which sequences are handed out' });

const ReplacementRule = z
  .discriminatedUnion('kind', [
    z.strictObject({ kind: z.literal('same-site') }),
    z.strictObject({ kind: z.literal('none') }),
  ])
  .meta({
    id: 'ReplacementRule',
    description: 'Who takes a vacated slot: the next arrival of its site and stratum, or nobody',
  });

export const Washout = z
  .strictObject({
    minimum: text(100).describe('ISO 8601 duration from the start of one period to the next'),
    maximum: text(100).nullable().describe('ISO 8601 duration, or null for no limit'),
  })
  .meta({ id: 'Washout', description: 'Rest between periods' });

const PeriodPlan = z
  .strictObject({
    count: z.int().describe('Number of periods in every sequence'),
    repetitions: z.int().describe('Trials of one participant in one period'),
    visits: z
      .array(z.array(z.int()).max(ListMax))
      .max(ListMax)
      .describe('Period numbers from 1 by visit: [[1, 2], [3, 4]] is two visits of two periods'),
    washout: Washout,
  })
  .meta({ id: 'PeriodPlan' });

const SiteTarget = z
  .strictObject({
    siteId: z.uuid().toLowerCase(),
    targetEnrolment: z
      .int()
      .describe('Slots at this site: how many participants it may enrol, replacements not counted'),
  })
  .meta({ id: 'SiteTarget' });

const Exposure = z
  .discriminatedUnion('kind', [
    z.strictObject({ kind: z.literal('constant'), value: z.number(), unit: text(40) }),
    z.strictObject({ kind: z.literal('measure'), measure: Key }),
  ])
  .meta({ id: 'Exposure', description: 'What a count is out of or over' });

const Measure = z
  .strictObject({
    key: Key,
    label: Label,
    unit: text(40).nullable(),
    scale: z.enum(['continuous', 'time-like', 'count', 'binary', 'ordinal']),
    direction: z.enum(['lower-is-better', 'higher-is-better', 'neither']),
    taken: z.enum(['each-trial', 'once-a-period']),
    validRange: z
      .strictObject({ minimum: z.number().nullable(), maximum: z.number().nullable() })
      .nullable()
      .describe('Values outside are implausible: stored and flagged, never refused'),
    decimals: z.int().describe('Decimal places in reports'),
    points: z
      .array(z.strictObject({ value: z.number(), label: Label }))
      .max(ListMax)
      .nullable()
      .describe('Ordinal measures only: the points of the rating, ascending'),
    exposure: Exposure.nullable().describe('Counts only'),
  })
  .meta({ id: 'Measure', description: 'A response that trials record' });

const ExclusionRule = z
  .discriminatedUnion('kind', [
    z.strictObject({
      kind: z.literal('range'),
      measure: Key,
      minimum: z.number().nullable(),
      maximum: z.number().nullable(),
    }),
    z.strictObject({ kind: z.literal('time-out'), measure: Key, limit: z.number() }),
    z.strictObject({ kind: z.literal('incomplete-participant'), minimumPeriods: z.int() }),
  ])
  .meta({ id: 'ExclusionRule' });

const ContrastChoice = z
  .discriminatedUnion('kind', [
    z.strictObject({ kind: z.literal('all-pairs') }),
    z.strictObject({ kind: z.literal('against-reference'), reference: Key }),
  ])
  .meta({ id: 'ContrastChoice' });

const MeasurePlan = z
  .strictObject({
    measure: Key,
    role: z.enum(['primary', 'secondary']),
    method: z.enum(['repeated-measures-anova', 'friedman']),
    primaryEstimate: z
      .enum(['adjusted-for-period', 'unadjusted'])
      .describe('The one primary estimate of the comparisons; the other stands beside it'),
    contrasts: ContrastChoice,
    multiplicity: z.enum(['holm', 'bonferroni', 'none']),
    alpha: z.number(),
    equivalence: z
      .strictObject({ lower: z.number(), upper: z.number() })
      .nullable()
      .describe('Margin in the unit of the measure, or a ratio for time-like measures'),
  })
  .meta({ id: 'MeasurePlan' });

export const ProtocolDocument = z
  .strictObject({
    title: text(400),
    rationale: text(20_000),
    hypotheses: z.array(Hypothesis).max(ListMax),
    withinFactors: z
      .array(Factor)
      .max(100)
      .describe('Their product gives the conditions; the last factor varies fastest'),
    betweenFactors: z.array(Factor).max(100).describe('Their product gives the strata'),
    scheme: SchemeChoice,
    policy: PolicyChoice,
    replacement: ReplacementRule,
    periods: PeriodPlan,
    sites: z.array(SiteTarget).max(ListMax),
    measures: z.array(Measure).max(ListMax),
    exclusions: z.array(ExclusionRule).max(ListMax).describe('Applied in this order'),
    analysis: z
      .strictObject({ measures: z.array(MeasurePlan).max(ListMax) })
      .meta({ id: 'AnalysisPlan' }),
  })
  .meta({ id: 'ProtocolDocument' });
export type ProtocolDocument = z.infer<typeof ProtocolDocument>;

type Writable<T> = T extends object ? { -readonly [K in keyof T]: Writable<T[K]> } : T;
type Same<A, B> = [A] extends [B] ? ([B] extends [A] ? true : false) : false;

/** Does not compile once this schema and the core's `Protocol` differ, in either direction. */
const sameAsCore: Same<ProtocolDocument, Writable<Protocol>> = true;
void sameAsCore;
