import { createHash, randomBytes } from 'node:crypto';
import {
  actorOf,
  type Call,
  type Principal,
  ROLES,
  type Role,
  SERVICE_ACTOR,
} from '#platform/call.ts';
import { type Database, type RecordsTransaction, recordsExecutor } from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry } from '#server/audit/log.ts';
import { ADMINISTRATION_CHAIN } from '#server/audit/schemas.ts';
import { requireAccount, requireLab, requireSite, requireStation } from './places.ts';
import { CreatedTokenResponse, type CreateTokenBody, type TokenResponse } from './schemas.ts';
import * as store from './store.ts';

/** Roles that a study lead or coordinator may give out; administrators give out any. */
const GRANTED_BY: Readonly<Record<Role, readonly Role[]>> = {
  administrator: ROLES,
  'study-lead': ['study-lead', 'site-coordinator', 'station', 'analyst', 'auditor'],
  'site-coordinator': ['station'],
  station: [],
  analyst: [],
  auditor: [],
};

const FIRST_TOKEN_LIFETIME_DAYS = 90;
const DAY_MS = 86_400_000;

/** 256 random bits; the prefix lets people and secret scanners tell what it is. */
function newToken(): { token: string; hash: Uint8Array<ArrayBuffer> } {
  const token = `fairturn_${randomBytes(32).toString('base64url')}`;
  return { token, hash: tokenHash(token) };
}

function tokenHash(token: string): Uint8Array<ArrayBuffer> {
  return new Uint8Array(createHash('sha256').update(token, 'utf8').digest());
}

/** The principal behind a token, or null when it is unknown, expired or revoked. */
export async function authenticate(database: Database, token: string): Promise<Principal | null> {
  const row = await store.selectTokenByHash(database.records, tokenHash(token));
  if (row === null || row.revokedAt !== null || row.expiresAt <= new Date()) return null;
  if (row.account !== null && row.account.closedAt !== null) return null;
  const role = ROLES.find((known) => known === row.role);
  if (role === undefined) return null;
  const { id: tokenId, accountId, labId, siteId, stationId } = row;
  return { tokenId, role, accountId, labId, siteId, stationId };
}

/**
 * Creates a token. One transaction; audit event `token-created`. An idempotent repeat answers
 * without the token itself.
 *
 * @throws {ProblemError} `not-permitted` for a role the caller may not give out, `not-found` for a
 *   place or account the caller cannot see, `account-closed`
 */
export function createToken(database: Database, call: Call, body: CreateTokenBody) {
  if (!GRANTED_BY[call.principal.role].includes(body.role)) {
    throw new ProblemError(
      'not-permitted',
      `The role ${call.principal.role} may not give out tokens of the role ${body.role}.`,
    );
  }
  return database.inRecordsTransaction((tx) => {
    const executor = recordsExecutor(tx);
    return once(executor, call, {
      parse: (stored) => CreatedTokenResponse.parse(stored),
      keep: (answer) => ({ ...answer, token: null }),
      work: async () => {
        const place = await placeOf(tx, call.principal, body);
        const { token, hash } = newToken();
        const row = await store.insertToken(tx, {
          id: uuidv7(),
          role: body.role,
          ...place,
          label: body.label,
          hash,
          createdAt: call.now,
          expiresAt: new Date(call.now.getTime() + body.lifetimeSeconds * 1000),
        });
        await appendEntry(executor, {
          chain: ADMINISTRATION_CHAIN,
          actor: actorOf(call),
          action: 'token-created',
          subject: row.id,
          details: { ...place, role: body.role, expiresAt: row.expiresAt.toISOString() },
          at: call.now,
        });
        return { status: 201, body: { ...tokenResponse(row), token } };
      },
    });
  });
}

type Place = Pick<store.NewToken, 'accountId' | 'labId' | 'siteId' | 'stationId'>;

/** The place a token is bound to, checked against what the caller may see. */
async function placeOf(
  tx: RecordsTransaction,
  principal: Principal,
  body: CreateTokenBody,
): Promise<Place> {
  if (body.role === 'station') {
    const station = await requireStation(tx, principal, body.stationId);
    const { id, siteId, site } = station;
    return { accountId: null, labId: site.labId, siteId, stationId: id };
  }
  const account = await requireAccount(tx, principal, body.accountId);
  if (account.closedAt !== null) {
    throw new ProblemError('account-closed', `The account ${account.id} is closed.`);
  }
  const labId = await labOf(tx, principal, body);
  if (account.labId !== null && account.labId !== labId) {
    throw new ProblemError('not-found', `The account ${account.id} belongs to another lab.`);
  }
  const siteId = body.role === 'site-coordinator' ? body.siteId : null;
  return { accountId: account.id, labId, siteId, stationId: null };
}

async function labOf(
  tx: RecordsTransaction,
  principal: Principal,
  body: Exclude<CreateTokenBody, { role: 'station' }>,
): Promise<string | null> {
  if (body.role === 'administrator') return null;
  if (body.role === 'site-coordinator')
    return (await requireSite(tx, principal, body.siteId)).labId;
  if (body.labId !== null) return (await requireLab(tx, principal, body.labId)).id;
  if (principal.labId === null) return null;
  throw new ProblemError('not-permitted', 'Only an administrator may let audit the whole service.');
}

/** Revokes a token at once; revoking it again changes nothing. Audit event `token-revoked`. */
export function revokeToken(database: Database, call: Call, tokenId: string) {
  return database.inRecordsTransaction(async (tx) => {
    const row = await store.selectToken(tx, tokenId);
    if (row === null || !reachesToken(call.principal, row)) {
      throw new ProblemError('not-found', `There is no token ${tokenId} here.`);
    }
    if (row.revokedAt !== null) return tokenResponse(row);
    const revoked = await store.updateTokenRevoked(tx, tokenId, call.now);
    await appendEntry(recordsExecutor(tx), {
      chain: ADMINISTRATION_CHAIN,
      actor: actorOf(call),
      action: 'token-revoked',
      subject: tokenId,
      details: {},
      at: call.now,
    });
    return tokenResponse(revoked);
  });
}

/** Coordinators reach the station tokens of their site; leads the tokens of their lab. */
function reachesToken(
  principal: Principal,
  token: { labId: string | null; siteId: string | null; role: string },
): boolean {
  if (principal.siteId !== null) {
    return token.siteId === principal.siteId && token.role === 'station';
  }
  return principal.labId === null || token.labId === principal.labId;
}

/**
 * The first administrator token, made when there is no token at all.
 *
 * @returns the token, to be shown once, or null when this is not the first start
 */
export function ensureFirstAdministrator(database: Database): Promise<{ token: string } | null> {
  return database.inRecordsTransaction(async (tx) => {
    // Two servers starting at once on an empty database: the second waits, then finds a token.
    await store.lockFirstStart(tx);
    if ((await store.countTokens(tx)) > 0) return null;
    const now = new Date();
    const account = await store.insertAccount(tx, {
      id: uuidv7(),
      labId: null,
      name: 'First administrator',
      createdAt: now,
    });
    const { token, hash } = newToken();
    const row = await store.insertToken(tx, {
      id: uuidv7(),
      role: 'administrator',
      accountId: account.id,
      labId: null,
      siteId: null,
      stationId: null,
      label: 'Made at first start',
      hash,
      createdAt: now,
      expiresAt: new Date(now.getTime() + FIRST_TOKEN_LIFETIME_DAYS * DAY_MS),
    });
    await appendEntry(recordsExecutor(tx), {
      chain: ADMINISTRATION_CHAIN,
      actor: SERVICE_ACTOR,
      action: 'token-created',
      subject: row.id,
      details: { accountId: account.id, role: 'administrator', reason: 'first start' },
      at: now,
    });
    return { token };
  });
}

export function tokenResponse(row: {
  id: string;
  role: string;
  accountId: string | null;
  labId: string | null;
  siteId: string | null;
  stationId: string | null;
  label: string;
  createdAt: Date;
  expiresAt: Date;
  revokedAt: Date | null;
}): TokenResponse {
  const role = ROLES.find((known) => known === row.role);
  if (role === undefined) throw new Error(`The token ${row.id} has an unknown role.`);
  const { id, accountId, labId, siteId, stationId, label } = row;
  return {
    id,
    role,
    accountId,
    labId,
    siteId,
    stationId,
    label,
    createdAt: row.createdAt.toISOString(),
    expiresAt: row.expiresAt.toISOString(),
    revokedAt: row.revokedAt?.toISOString() ?? null,
  };
}
