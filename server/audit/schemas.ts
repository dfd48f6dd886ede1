import { z } from 'zod';
import { pageOf } from '#platform/paging.ts';

export const ADMINISTRATION_CHAIN = 'administration';

export const ChainName = z
  .union([z.literal(ADMINISTRATION_CHAIN), z.uuid().toLowerCase()])
  .describe('`administration`, or the id of a study');

export const ChainParams = z.strictObject({ chain: ChainName });

export const AuditEntryResponse = z
  .strictObject({
    number: z.number().int(),
    at: z.iso.datetime(),
    content: z.string().describe('Canonical JSON (RFC 8785) as hashed'),
    previousHash: z.string(),
    hash: z.string(),
  })
  .meta({ id: 'AuditEntry' });

export const AuditEntryPage = pageOf(AuditEntryResponse).meta({ id: 'AuditEntryPage' });

export const Checkpoint = z
  .strictObject({
    document: z
      .string()
      .max(4_000_000)
      .describe('Canonical JSON: the head of every chain, the time and the key'),
    signature: z.string().max(200).describe('Ed25519 over the UTF-8 of `document`, base64'),
  })
  .meta({ id: 'Checkpoint' });

export const CheckpointResponse = z
  .strictObject({
    id: z.uuid(),
    createdAt: z.iso.datetime(),
    document: z.string(),
    signature: z.string(),
  })
  .meta({ id: 'KeptCheckpoint' });
export type CheckpointResponse = z.infer<typeof CheckpointResponse>;

export const CheckpointPage = pageOf(CheckpointResponse).meta({ id: 'KeptCheckpointPage' });

/** What a checkpoint's document says. */
export const CheckpointDocument = z.strictObject({
  chains: z.array(
    z.strictObject({ chain: z.string(), hash: z.string(), number: z.number().int() }),
  ),
  keyId: z.string(),
  madeAt: z.iso.datetime(),
});
export type CheckpointDocument = z.infer<typeof CheckpointDocument>;

export const VerificationBody = z
  .strictObject({
    checkpoint: Checkpoint.optional().describe('A checkpoint kept outside the database'),
  })
  .meta({ id: 'VerificationBody' });

const ChainFault = z.strictObject({
  chain: z.string(),
  number: z.number().int().nullable().describe('The first entry at which the chain fails'),
  code: z.enum([
    'gap',
    'hash-mismatch',
    'link-mismatch',
    'time-mismatch',
    'head-mismatch',
    'checkpoint-mismatch',
    'checkpoint-missing-entry',
    'checkpoint-signature',
    'disclosure-mismatch',
  ]),
  message: z.string(),
});
export type ChainFault = z.infer<typeof ChainFault>;

export const VerificationResponse = z
  .strictObject({
    intact: z.boolean(),
    chains: z.array(
      z.strictObject({ chain: z.string(), entries: z.number().int(), headHash: z.string() }),
    ),
    disclosures: z.number().int().describe('Commitments that could be opened and hold'),
    faults: z.array(ChainFault),
  })
  .meta({ id: 'Verification' });
export type VerificationResponse = z.infer<typeof VerificationResponse>;

export const PublicKeyResponse = z
  .strictObject({ keyId: z.string(), publicKey: z.string().describe('PEM, Ed25519') })
  .meta({ id: 'AuditPublicKey' });
