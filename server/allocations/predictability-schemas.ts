import { z } from 'zod';
import { Factor, PolicyChoice, SchemeChoice } from '#server/studies/schemas.ts';

export const PredictabilityBody = z
  .strictObject({
    withinFactors: z.array(Factor).max(100),
    betweenFactors: z.array(Factor).max(100).default([]),
    scheme: SchemeChoice,
    periods: z.int().min(1).max(1000).describe('Number of periods in every sequence'),
    policies: z.array(PolicyChoice).min(1).max(6).describe('Those to be compared'),
    sites: z.int().min(1).max(50),
    stationsPerSite: z.int().min(1).max(50),
    participantsPerSite: z.int().min(1).max(1000).describe('At least as many as stations'),
    studies: z.int().min(2).max(1000).default(100).describe('How many studies are simulated'),
    imagined: z
      .int()
      .min(1)
      .max(256)
      .default(32)
      .describe('Studies that the guesser imagines where slots are hidden from it: more, better'),
    seed: z
      .string()
      .regex(/^[0-9a-f]{16}$/)
      .optional()
      .describe('16 lower-case hexadecimal digits; drawn by the service when absent'),
  })
  .meta({ id: 'PredictabilityBody' });
export type PredictabilityBody = z.infer<typeof PredictabilityBody>;

const Share = z
  .strictObject({
    estimate: z.number().describe('Share of slots whose sequence is guessed right, from 0 to 1'),
    standardError: z.number().describe('Of the estimate, from the simulation'),
  })
  .meta({ id: 'GuessedShare' });

export const PredictabilityResponse = z
  .strictObject({
    seed: z.string().describe('The same seed and body give the same estimates'),
    sequences: z.int(),
    chance: z.number().describe('What chance alone gives: 1 / sequences'),
    policies: z
      .array(
        z.strictObject({
          policy: PolicyChoice,
          station: Share.describe('By somebody who sees one station; attainable'),
          site: Share.describe('By somebody who sees all stations of one site; attainable'),
          study: Share.describe('By somebody who sees every slot; nobody can do better'),
        }),
      )
      .describe('In the order of the request'),
  })
  .meta({ id: 'PredictabilityEstimate' });
export type PredictabilityResponse = z.infer<typeof PredictabilityResponse>;
