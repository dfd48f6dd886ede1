import { canonicalJson } from '#core/hashing/canonical-json.ts';
import type { Call } from '#platform/call.ts';
import { actorOf } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import {
  cutPage,
  decodeCursor,
  NUMBER_POSITION,
  type PageQuery,
  UUID_POSITION,
} from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry } from './log.ts';
import { ADMINISTRATION_CHAIN, CheckpointResponse, type VerificationResponse } from './schemas.ts';
import { newPrivateKey, type SigningKey, signDocument, signingKeyFrom } from './signing.ts';
import * as store from './store.ts';
import { parseCheckpoint, verifyChains } from './verification.ts';

const KEY_NAME = 'audit-checkpoint-ed25519';

export interface AuditOptions {
  readonly database: Database;
  /** May this caller see the study whose chain this is? Answered by the studies feature. */
  readonly maySeeStudy: (call: Call, studyId: string) => Promise<boolean>;
}

export type AuditService = ReturnType<typeof createAuditService>;

/** Reading, checking and vouching for the audit chains. Entries are appended through `log.ts`. */
export function createAuditService({ database, maySeeStudy }: AuditOptions) {
  return {
    /** The public half of the key that signs checkpoints. */
    publicKey: async () => {
      const key = await database.inSqlTransaction((tx) => ensureSigningKey(tx));
      return { keyId: key.keyId, publicKey: key.publicKeyPem };
    },

    /** @throws {ProblemError} `not-found` for a chain that the caller may not see */
    listEntries: async (call: Call, chain: string, page: PageQuery) => {
      await requireVisible(call, chain, maySeeStudy);
      const after = Number(decodeCursor(page.cursor, NUMBER_POSITION) ?? '0');
      const rows = await database.inSqlTransaction((tx) =>
        store.selectEntries(tx, chain, after, page.limit + 1),
      );
      return cutPage(
        rows,
        page.limit,
        (row) => String(row.number),
        (row) => ({
          ...row,
          at: row.at.toISOString(),
        }),
      );
    },

    /**
     * Signs the heads of the chains that the caller may see. The checkpoint is kept here too, but
     * it proves something only where the database's administrators cannot reach it: a lab stores
     * its copy elsewhere.
     */
    makeCheckpoint: async (call: Call) => {
      const chains = await visibleChains(call, undefined);
      return await database.inSqlTransaction((tx) =>
        once(sqlExecutor(tx), call, {
          parse: (stored) => CheckpointResponse.parse(stored),
          work: async () => ({ status: 201, body: await makeCheckpoint(tx, call, chains) }),
        }),
      );
    },

    listCheckpoints: async (call: Call, page: PageQuery) => {
      const { labId } = call.principal;
      const after = decodeCursor(page.cursor, UUID_POSITION);
      const rows = await database.inSqlTransaction((tx) =>
        store.selectCheckpoints(tx, { labId, after, limit: page.limit + 1 }),
      );
      return cutPage(
        rows,
        page.limit,
        (row) => row.id,
        (row) => ({
          ...row,
          createdAt: row.createdAt.toISOString(),
        }),
      );
    },

    /** Recomputes every chain that the caller may see; see `verifyChains`. */
    verify: async (
      call: Call,
      checkpoint: { document: string; signature: string } | undefined,
    ): Promise<VerificationResponse> => {
      const key = await database.inSqlTransaction((tx) => ensureSigningKey(tx));
      const chains = await visibleChains(call, checkpoint);
      // Entries and heads as of one moment, whatever is appended meanwhile.
      return await database.inReadingTransaction((tx) => verifyChains(tx, key, chains, checkpoint));
    },
  };

  async function visibleChains(
    call: Call,
    checkpoint: { document: string } | undefined,
  ): Promise<string[]> {
    const stored = await database.inSqlTransaction((tx) => store.selectChains(tx));
    // A chain that was removed whole is known only from the checkpoint. Its study is still there.
    const vouched = parseCheckpoint(checkpoint?.document ?? '')?.chains.map((c) => c.chain) ?? [];
    const visible: string[] = [];
    for (const chain of new Set([...stored, ...vouched])) {
      if (await isVisible(call, chain, maySeeStudy)) visible.push(chain);
    }
    return visible;
  }
}

/** The signing key, made when there is none. */
export async function ensureSigningKey(tx: SqlTransaction): Promise<SigningKey> {
  return signingKeyFrom(await store.ensureKey(tx, KEY_NAME, newPrivateKey, new Date()));
}

async function makeCheckpoint(
  tx: SqlTransaction,
  call: Call,
  chains: readonly string[],
): Promise<CheckpointResponse> {
  const key = await ensureSigningKey(tx);
  const id = uuidv7();
  await appendEntry(sqlExecutor(tx), {
    chain: ADMINISTRATION_CHAIN,
    actor: actorOf(call),
    action: 'checkpoint-made',
    subject: id,
    details: { keyId: key.keyId },
    at: call.now,
  });
  const document = await checkpointDocument(tx, key, chains, call.now);
  const row = { id, document, signature: signDocument(key, document), createdAt: call.now };
  await store.insertCheckpoint(tx, row, call.principal.labId);
  return { ...row, createdAt: call.now.toISOString() };
}

async function checkpointDocument(
  tx: SqlTransaction,
  key: SigningKey,
  chains: readonly string[],
  now: Date,
): Promise<string> {
  const heads: { chain: string; number: number; hash: string }[] = [];
  for (const chain of chains) {
    const head = await store.selectHead(tx, chain);
    if (head !== null) heads.push({ chain, ...head });
  }
  return canonicalJson({ chains: heads, keyId: key.keyId, madeAt: now.toISOString() });
}

async function isVisible(
  call: Call,
  chain: string,
  maySeeStudy: AuditOptions['maySeeStudy'],
): Promise<boolean> {
  if (chain === ADMINISTRATION_CHAIN) return call.principal.labId === null;
  return await maySeeStudy(call, chain);
}

async function requireVisible(
  call: Call,
  chain: string,
  maySeeStudy: AuditOptions['maySeeStudy'],
): Promise<void> {
  if (await isVisible(call, chain, maySeeStudy)) return;
  throw new ProblemError('not-found', `There is no chain ${chain} here.`);
}
