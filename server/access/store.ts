import type { RecordsTransaction } from '#platform/database.ts';

/** Filters of a list: the place that the caller may see, and the page. */
export interface ListFilter {
  readonly labId: string | null;
  readonly siteId: string | null;
  readonly after: string | null;
  readonly limit: number;
}

function page(filter: ListFilter) {
  return {
    take: filter.limit + 1,
    orderBy: { id: 'asc' },
  } as const;
}

function idAfter(filter: ListFilter) {
  return filter.after === null ? {} : { id: { gt: filter.after } };
}

export function insertLab(
  tx: RecordsTransaction,
  lab: { id: string; name: string; createdAt: Date },
) {
  return tx.lab.create({ data: lab });
}

export function selectLab(tx: RecordsTransaction, id: string) {
  return tx.lab.findUnique({ where: { id } });
}

export function selectLabs(tx: RecordsTransaction, filter: ListFilter) {
  const own = filter.labId === null ? {} : { id: filter.labId };
  return tx.lab.findMany({ where: { AND: [own, idAfter(filter)] }, ...page(filter) });
}

export function insertSite(
  tx: RecordsTransaction,
  site: { id: string; labId: string; name: string; createdAt: Date },
) {
  return tx.site.create({ data: site });
}

export function selectSite(tx: RecordsTransaction, id: string) {
  return tx.site.findUnique({ where: { id } });
}

export function selectSitesByIds(tx: RecordsTransaction, ids: readonly string[]) {
  return tx.site.findMany({ where: { id: { in: [...ids] } } });
}

export function selectSites(tx: RecordsTransaction, filter: ListFilter) {
  return tx.site.findMany({
    where: {
      ...(filter.labId === null ? {} : { labId: filter.labId }),
      AND: [filter.siteId === null ? {} : { id: filter.siteId }, idAfter(filter)],
    },
    ...page(filter),
  });
}

export function insertStation(
  tx: RecordsTransaction,
  station: { id: string; siteId: string; name: string; createdAt: Date },
) {
  return tx.station.create({ data: station });
}

export function selectStation(tx: RecordsTransaction, id: string) {
  return tx.station.findUnique({ where: { id }, include: { site: true } });
}

export function selectStations(tx: RecordsTransaction, filter: ListFilter & { siteId: string }) {
  return tx.station.findMany({
    where: { siteId: filter.siteId, ...idAfter(filter) },
    ...page(filter),
  });
}

export function insertAccount(
  tx: RecordsTransaction,
  account: { id: string; labId: string | null; name: string; createdAt: Date },
) {
  return tx.account.create({ data: account });
}

export function selectAccount(tx: RecordsTransaction, id: string) {
  return tx.account.findUnique({ where: { id } });
}

export function selectAccounts(tx: RecordsTransaction, filter: ListFilter) {
  return tx.account.findMany({
    where: { ...(filter.labId === null ? {} : { labId: filter.labId }), ...idAfter(filter) },
    ...page(filter),
  });
}

export function updateAccountClosed(tx: RecordsTransaction, id: string, closedAt: Date) {
  return tx.account.update({ where: { id }, data: { closedAt } });
}

export interface NewToken {
  readonly id: string;
  readonly role: string;
  readonly accountId: string | null;
  readonly labId: string | null;
  readonly siteId: string | null;
  readonly stationId: string | null;
  readonly label: string;
  readonly hash: Uint8Array<ArrayBuffer>;
  readonly createdAt: Date;
  readonly expiresAt: Date;
}

export function insertToken(tx: RecordsTransaction, token: NewToken) {
  return tx.token.create({ data: token });
}

export function selectToken(tx: RecordsTransaction, id: string) {
  return tx.token.findUnique({ where: { id } });
}

export function selectTokenByHash(tx: RecordsTransaction, hash: Uint8Array<ArrayBuffer>) {
  return tx.token.findUnique({ where: { hash }, include: { account: true } });
}

export function selectTokens(tx: RecordsTransaction, filter: ListFilter) {
  return tx.token.findMany({
    where: {
      ...(filter.labId === null ? {} : { labId: filter.labId }),
      ...(filter.siteId === null ? {} : { siteId: filter.siteId }),
      ...idAfter(filter),
    },
    ...page(filter),
  });
}

export function updateTokenRevoked(tx: RecordsTransaction, id: string, revokedAt: Date) {
  return tx.token.update({ where: { id }, data: { revokedAt } });
}

export function updateAccountTokensRevoked(tx: RecordsTransaction, accountId: string, at: Date) {
  return tx.token.updateMany({ where: { accountId, revokedAt: null }, data: { revokedAt: at } });
}

export function countTokens(tx: RecordsTransaction) {
  return tx.token.count();
}

/** Held until the transaction ends; nobody else makes a first administrator meanwhile. */
export async function lockFirstStart(tx: RecordsTransaction): Promise<void> {
  await tx.$executeRaw`select pg_advisory_xact_lock(hashtext('fairturn-first-administrator'))`;
}
