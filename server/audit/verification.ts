import { createHash } from 'node:crypto';
import { z } from 'zod';
import type { JsonValue } from '#core/hashing/canonical-json.ts';
import { saltedCommitment } from '#core/hashing/digest.ts';
import type { SqlTransaction } from '#platform/database.ts';
import { type ChainFault, CheckpointDocument, type VerificationResponse } from './schemas.ts';
import { type SigningKey, signatureHolds } from './signing.ts';
import * as store from './store.ts';

const UUID = /^[0-9a-f-]{36}$/;
const entryTime = z.looseObject({ at: z.iso.datetime() });

/**
 * Recomputes the chains from the raw rows, never from stored hashes: numbers from 1 without a gap,
 * each hash over chain, number, previous hash and content, the head as recorded. A checkpoint from
 * outside then fixes what each chain must have held at its time, which shows a cut-off end or a
 * history written anew.
 */
export async function verifyChains(
  tx: SqlTransaction,
  key: SigningKey,
  chains: readonly string[],
  checkpoint: { document: string; signature: string } | undefined,
): Promise<VerificationResponse> {
  const faults: ChainFault[] = [];
  const expected = checkpointHeads(key, checkpoint, faults);
  const summaries: VerificationResponse['chains'] = [];
  let disclosures = 0;
  for (const chain of chains) {
    const summary = await verifyChain(tx, chain, expected.get(chain), faults);
    summaries.push(summary);
    if (UUID.test(chain)) disclosures += await verifyDisclosures(tx, chain, faults);
  }
  return { intact: faults.length === 0, chains: summaries, disclosures, faults };
}

/** The heads a checkpoint vouches for; a fault when it is not signed with this service's key. */
function checkpointHeads(
  key: SigningKey,
  checkpoint: { document: string; signature: string } | undefined,
  faults: ChainFault[],
): Map<string, { number: number; hash: string }> {
  if (checkpoint === undefined) return new Map();
  const document = parseCheckpoint(checkpoint.document);
  if (document === null || !signatureHolds(key, checkpoint.document, checkpoint.signature)) {
    const message = 'This is no checkpoint signed with the key of this service.';
    faults.push({ chain: '', number: null, code: 'checkpoint-signature', message });
    return new Map();
  }
  return new Map(document.chains.map((c) => [c.chain, { number: c.number, hash: c.hash }]));
}

/** The document of a checkpoint, or null when the text is none. */
export function parseCheckpoint(text: string): CheckpointDocument | null {
  try {
    return CheckpointDocument.safeParse(JSON.parse(text)).data ?? null;
  } catch {
    return null;
  }
}

async function verifyChain(
  tx: SqlTransaction,
  chain: string,
  vouched: { number: number; hash: string } | undefined,
  faults: ChainFault[],
): Promise<VerificationResponse['chains'][number]> {
  let previous = '0'.repeat(64);
  let number = 0;
  let fault: ChainFault | null = null;
  let vouchedHash: string | null = null;
  for await (const batch of store.streamEntries(tx, chain)) {
    for (const entry of batch) {
      number += 1;
      const recomputed = entryHash(chain, number, previous, entry.content);
      fault ??= entryFault(chain, number, previous, recomputed, entry);
      previous = recomputed;
      if (number === vouched?.number) vouchedHash = recomputed;
    }
  }
  const head = await store.selectHead(tx, chain);
  if (fault === null && (head === null || head.number !== number || head.hash !== previous)) {
    const recorded = head?.number ?? 'none';
    const message = `The recorded head is entry ${recorded}; the rows end at ${number}.`;
    fault = { chain, number, code: 'head-mismatch', message };
  }
  if (fault !== null) faults.push(fault);
  if (vouched !== undefined && vouchedHash !== vouched.hash) {
    faults.push(vouchedFault(chain, vouched, number));
  }
  return { chain, entries: number, headHash: previous };
}

function vouchedFault(chain: string, vouched: { number: number }, length: number): ChainFault {
  return length < vouched.number
    ? {
        chain,
        number: vouched.number,
        code: 'checkpoint-missing-entry',
        message: `The checkpoint vouches for entry ${vouched.number}; the chain ends at ${length}.`,
      }
    : {
        chain,
        number: vouched.number,
        code: 'checkpoint-mismatch',
        message: `Entry ${vouched.number} is not the one that the checkpoint vouches for.`,
      };
}

function entryFault(
  chain: string,
  number: number,
  previous: string,
  recomputed: string,
  entry: store.StoredEntry,
): ChainFault | null {
  const fault = (code: ChainFault['code'], message: string): ChainFault => ({
    chain,
    number,
    code,
    message,
  });
  if (entry.number !== number) {
    return fault('gap', `Entry ${number} is missing; the next one there is ${entry.number}.`);
  }
  if (entry.previousHash !== previous) {
    return fault('link-mismatch', `Entry ${number} does not continue the one before it.`);
  }
  if (entry.hash !== recomputed) {
    return fault('hash-mismatch', `Entry ${number} is not what its hash was made from.`);
  }
  const content = entryTime.safeParse(JSON.parse(entry.content));
  if (!content.success || content.data.at !== entry.at.toISOString()) {
    return fault('time-mismatch', `The time beside entry ${number} is not the one in its content.`);
  }
  return null;
}

/** As the database function `audit_append` hashes. */
export function entryHash(
  chain: string,
  number: number,
  previous: string,
  content: string,
): string {
  return createHash('sha256').update(`${chain}\n${number}\n${previous}\n${content}`).digest('hex');
}

async function verifyDisclosures(
  tx: SqlTransaction,
  studyId: string,
  faults: ChainFault[],
): Promise<number> {
  let held = 0;
  for await (const batch of store.streamDisclosures(tx, studyId)) {
    for (const row of batch) {
      const value: JsonValue = JSON.parse(row.value);
      if (saltedCommitment(row.salt, value) === row.commitment) held += 1;
      else {
        const message = `The value kept for commitment ${row.commitment} does not open it.`;
        faults.push({ chain: studyId, number: null, code: 'disclosure-mismatch', message });
      }
    }
  }
  return held;
}
