import { actorOf, type Call, type Principal } from '#platform/call.ts';
import {
  type Database,
  type RecordsTransaction,
  recordsExecutor,
  sqlState,
} from '#platform/database.ts';
import { once } from '#platform/idempotency.ts';
import { uuidv7 } from '#platform/ids.ts';
import { cutPage, decodeCursor, type PageQuery, UUID_POSITION } from '#platform/paging.ts';
import { ProblemError } from '#platform/problems.ts';
import { appendEntry } from '#server/audit/log.ts';
import { ADMINISTRATION_CHAIN } from '#server/audit/schemas.ts';
import { reachesLab, requireAccount, requireLab, requireSite } from './places.ts';
import {
  AccountResponse,
  type CreateAccountBody,
  type CreateLabBody,
  type CreateSiteBody,
  type CreateStationBody,
  type CreateTokenBody,
  LabResponse,
  SiteResponse,
  StationResponse,
} from './schemas.ts';
import * as store from './store.ts';
import { authenticate, createToken, revokeToken, tokenResponse } from './tokens.ts';

export { reachesLab, reachesSite } from './places.ts';
export { authenticate, ensureFirstAdministrator } from './tokens.ts';

export type AccessService = ReturnType<typeof createAccessService>;

/** Labs, their sites, the sites' stations, accounts and tokens. */
export function createAccessService(database: Database) {
  const list = <Row extends { id: string }, Item>(
    call: Call,
    query: PageQuery,
    select: (filter: store.ListFilter) => PromiseLike<Row[]>,
    item: (row: Row) => Item,
  ) => listed(call.principal, query, select, item);
  const { records } = database;
  return {
    /** Audit event `lab-created`. @throws {ProblemError} `already-exists` for a name in use */
    createLab: (call: Call, body: CreateLabBody) =>
      creating(database, call, LabResponse, 'lab-created', body.name, async (tx) => {
        const lab = { id: uuidv7(), name: body.name, createdAt: call.now };
        return labResponse(await store.insertLab(tx, lab));
      }),

    listLabs: (call: Call, query: PageQuery) =>
      list(call, query, (filter) => store.selectLabs(records, filter), labResponse),

    /** Audit event `site-created`. @throws {ProblemError} `not-found`, `already-exists` */
    createSite: (call: Call, labId: string, body: CreateSiteBody) =>
      creating(database, call, SiteResponse, 'site-created', body.name, async (tx) => {
        await requireLab(tx, call.principal, labId);
        const site = { id: uuidv7(), labId, name: body.name, createdAt: call.now };
        return siteResponse(await store.insertSite(tx, site));
      }),

    listSites: (call: Call, query: PageQuery & { labId?: string | undefined }) => {
      const { labId } = query;
      if (labId !== undefined && !reachesLab(call.principal, labId)) {
        throw new ProblemError('not-found', `There is no lab ${labId} here.`);
      }
      return list(
        call,
        query,
        (filter) => store.selectSites(records, { ...filter, labId: labId ?? filter.labId }),
        siteResponse,
      );
    },

    /** Audit event `station-created`. @throws {ProblemError} `not-found`, `already-exists` */
    createStation: (call: Call, siteId: string, body: CreateStationBody) =>
      creating(database, call, StationResponse, 'station-created', body.name, async (tx) => {
        await requireSite(tx, call.principal, siteId);
        const station = { id: uuidv7(), siteId, name: body.name, createdAt: call.now };
        return stationResponse(await store.insertStation(tx, station));
      }),

    listStations: async (call: Call, siteId: string, query: PageQuery) => {
      await requireSite(records, call.principal, siteId);
      return await list(
        call,
        query,
        (filter) => store.selectStations(records, { ...filter, siteId }),
        stationResponse,
      );
    },

    /** Audit event `account-created`; the log names the account by id only. */
    createAccount: (call: Call, body: CreateAccountBody) =>
      creating(database, call, AccountResponse, 'account-created', body.name, async (tx) => {
        const { labId, name } = body;
        if (labId !== null) await requireLab(tx, call.principal, labId);
        else if (call.principal.labId !== null) {
          throw new ProblemError(
            'not-permitted',
            'A study lead makes accounts of the own lab only.',
          );
        }
        const account = { id: uuidv7(), labId, name, createdAt: call.now };
        return accountResponse(await store.insertAccount(tx, account));
      }),

    listAccounts: (call: Call, query: PageQuery) =>
      list(call, query, (filter) => store.selectAccounts(records, filter), accountResponse),

    /** Closes an account and revokes its tokens, in one transaction. Audit `account-closed`. */
    closeAccount: (call: Call, accountId: string) =>
      database.inRecordsTransaction(async (tx) => {
        const account = await requireAccount(tx, call.principal, accountId);
        if (account.closedAt !== null) return accountResponse(account);
        const closed = await store.updateAccountClosed(tx, accountId, call.now);
        const { count } = await store.updateAccountTokensRevoked(tx, accountId, call.now);
        await appendEntry(recordsExecutor(tx), {
          chain: ADMINISTRATION_CHAIN,
          actor: actorOf(call),
          action: 'account-closed',
          subject: accountId,
          details: { tokensRevoked: count },
          at: call.now,
        });
        return accountResponse(closed);
      }),

    createToken: (call: Call, body: CreateTokenBody) => createToken(database, call, body),

    listTokens: (call: Call, query: PageQuery) =>
      list(call, query, (filter) => store.selectTokens(records, filter), tokenResponse),

    revokeToken: (call: Call, tokenId: string) => revokeToken(database, call, tokenId),

    getOwnToken: async (call: Call) => {
      const row = await store.selectToken(records, call.principal.tokenId);
      if (row === null) throw new ProblemError('not-found', 'The token is gone.');
      return tokenResponse(row);
    },

    authenticate: (token: string) => authenticate(database, token),
  };
}

/** Sites by id, for features that hold site ids; unknown ids are simply not in the answer. */
export async function findSites(tx: RecordsTransaction, ids: readonly string[]) {
  return (await store.selectSitesByIds(tx, ids)).map(siteResponse);
}

/** Creates one record, once per idempotency key, with its audit entry. */
function creating<Body extends { id: string }>(
  database: Database,
  call: Call,
  schema: { parse: (stored: unknown) => Body },
  action: string,
  name: string,
  insert: (tx: RecordsTransaction) => Promise<Body>,
) {
  return database
    .inRecordsTransaction((tx) => {
      const executor = recordsExecutor(tx);
      return once(executor, call, {
        parse: (stored) => schema.parse(stored),
        work: async () => {
          const body = await insert(tx);
          await appendEntry(executor, {
            chain: ADMINISTRATION_CHAIN,
            actor: actorOf(call),
            action,
            subject: body.id,
            details: {},
            at: call.now,
          });
          return { status: 201, body };
        },
      });
    })
    .catch((error: unknown) => {
      if (sqlState(error) !== '23505') throw error;
      throw new ProblemError('already-exists', `The name “${name}” is in use already.`);
    });
}

async function listed<Row extends { id: string }, Item>(
  principal: Principal,
  query: PageQuery,
  select: (filter: store.ListFilter) => PromiseLike<Row[]>,
  item: (row: Row) => Item,
) {
  const rows = await select({
    labId: principal.labId,
    siteId: principal.siteId,
    after: decodeCursor(query.cursor, UUID_POSITION),
    limit: query.limit,
  });
  return cutPage(rows, query.limit, (row) => row.id, item);
}

interface Named {
  id: string;
  name: string;
  createdAt: Date;
}

function labResponse({ id, name, createdAt }: Named): LabResponse {
  return { id, name, createdAt: createdAt.toISOString() };
}

function siteResponse({ id, labId, name, createdAt }: Named & { labId: string }): SiteResponse {
  return { id, labId, name, createdAt: createdAt.toISOString() };
}

function stationResponse(row: Named & { siteId: string }): StationResponse {
  return { id: row.id, siteId: row.siteId, name: row.name, createdAt: row.createdAt.toISOString() };
}

function accountResponse(
  row: Named & { labId: string | null; closedAt: Date | null },
): AccountResponse {
  return {
    id: row.id,
    labId: row.labId,
    name: row.name,
    createdAt: row.createdAt.toISOString(),
    closedAt: row.closedAt?.toISOString() ?? null,
  };
}
