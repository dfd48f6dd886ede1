import type { Principal } from '#platform/call.ts';
import type { RecordsTransaction } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import * as store from './store.ts';

/** Does the caller's place contain this lab? A lab's own people, or the service's. */
export function reachesLab(principal: Principal, labId: string | null): boolean {
  return principal.labId === null || principal.labId === labId;
}

/** Does the caller's place contain this site? */
export function reachesSite(principal: Principal, site: { id: string; labId: string }): boolean {
  if (principal.siteId !== null) return principal.siteId === site.id;
  return reachesLab(principal, site.labId);
}

/** @throws {ProblemError} `not-found` when there is no such lab, or none the caller may see */
export async function requireLab(tx: RecordsTransaction, principal: Principal, labId: string) {
  const lab = reachesLab(principal, labId) ? await store.selectLab(tx, labId) : null;
  if (lab === null) throw new ProblemError('not-found', `There is no lab ${labId} here.`);
  return lab;
}

/** @throws {ProblemError} `not-found` when there is no such site, or none the caller may see */
export async function requireSite(tx: RecordsTransaction, principal: Principal, siteId: string) {
  const site = await store.selectSite(tx, siteId);
  if (site === null || !reachesSite(principal, site)) {
    throw new ProblemError('not-found', `There is no site ${siteId} here.`);
  }
  return site;
}

/** @throws {ProblemError} `not-found` when there is no such station, or none the caller may see */
export async function requireStation(tx: RecordsTransaction, principal: Principal, id: string) {
  const station = await store.selectStation(tx, id);
  if (station === null || !reachesSite(principal, station.site)) {
    throw new ProblemError('not-found', `There is no station ${id} here.`);
  }
  return station;
}

/** @throws {ProblemError} `not-found` when there is no such account, or none the caller may see */
export async function requireAccount(tx: RecordsTransaction, principal: Principal, id: string) {
  const account = await store.selectAccount(tx, id);
  if (account === null || !reachesLab(principal, account.labId)) {
    throw new ProblemError('not-found', `There is no account ${id} here.`);
  }
  return account;
}
