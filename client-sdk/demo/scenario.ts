import { randomBytes } from 'node:crypto';
import path from 'node:path';
import { Fairturn, type Study } from '@fairturn/client';
import { linerProtocol } from './protocol.ts';
import type { StationOrders } from './station.ts';

export interface Scenario {
  readonly lead: Fairturn;
  readonly auditor: Fairturn;
  readonly study: Study;
  readonly stations: readonly StationOrders[];
  readonly siteNames: ReadonlyMap<string, string>;
}

const DAY_SECONDS = 86_400;

const SITES = [
  { lab: 'Cold work laboratory', site: 'Harbour' },
  { lab: 'Cold work laboratory', site: 'Ridge' },
  { lab: 'Hand function laboratory', site: 'Fen' },
] as const;

const PARTICIPANTS_PER_SITE = 16;

/** What happens at each station besides the plan. */
const EVENTS: Readonly<Record<string, Partial<StationOrders>>> = {
  'Harbour 1': { withdrawal: { nth: 2, afterPeriod: 2, why: 'unwell' } },
  'Harbour 2': { mistypedTime: 3 },
  'Ridge 1': { withdrawal: { nth: 4, afterPeriod: 1, why: 'schedule' }, repeatedUpload: 2 },
  'Ridge 2': { linkDown: 3 },
  'Fen 1': { wrongLiner: 3, withdrawal: { nth: 5, afterPeriod: 3, why: 'own-wish' } },
  'Fen 2': { withdrawal: { nth: 1, afterPeriod: 0, why: 'no-show' } },
};

/**
 * Labs, sites, stations, people and the registered protocol: everything before the first arrival.
 */
export async function setUp(options: {
  readonly url: string;
  readonly administratorToken: string;
  readonly folder: string;
  readonly seed: string;
}): Promise<Scenario> {
  const { url } = options;
  const administrator = new Fairturn({ url, token: options.administratorToken });
  const labs = new Map<string, string>();
  const siteNames = new Map<string, string>();
  for (const { lab, site } of SITES) {
    const labId = labs.get(lab) ?? (await administrator.labs.create({ name: lab })).id;
    labs.set(lab, labId);
    siteNames.set((await administrator.sites.create({ labId, name: site })).id, site);
  }
  const lead = await leadOf(administrator, labs.get(SITES[0].lab) ?? '');
  const study = await registered(lead, [...siteNames.keys()]);
  const stations: StationOrders[] = [];
  for (const [siteId, site] of siteNames) {
    for (const number of [1, 2]) {
      const name = `${site} ${number}`;
      const token = await stationToken(administrator, siteId, name);
      const folder = path.join(options.folder, name.replace(' ', '-'));
      const operator = `OP-${site.charAt(0)}${number}`;
      const { seed } = options;
      stations.push({
        url,
        token,
        studyId: study.id,
        name,
        operator,
        folder,
        seed,
        ...EVENTS[name],
      });
    }
  }
  return { lead, auditor: await auditorOf(administrator), study, stations, siteNames };
}

async function leadOf(administrator: Fairturn, labId: string): Promise<Fairturn> {
  const account = await administrator.accounts.create({ name: 'Study lead', labId });
  const { token } = await administrator.tokens.create({
    role: 'study-lead',
    accountId: account.id,
    labId,
    label: 'demo',
    lifetimeSeconds: DAY_SECONDS,
  });
  return clientOf(administrator, token);
}

async function auditorOf(administrator: Fairturn): Promise<Fairturn> {
  const account = await administrator.accounts.create({ name: 'Auditor', labId: null });
  const { token } = await administrator.tokens.create({
    role: 'auditor',
    accountId: account.id,
    labId: null,
    label: 'demo',
    lifetimeSeconds: DAY_SECONDS,
  });
  return clientOf(administrator, token);
}

async function stationToken(
  administrator: Fairturn,
  siteId: string,
  name: string,
): Promise<string> {
  const station = await administrator.stations.create({ siteId, name });
  const { token } = await administrator.tokens.create({
    role: 'station',
    stationId: station.id,
    label: name,
    lifetimeSeconds: DAY_SECONDS,
  });
  if (token === null) throw new Error('The token was not shown.');
  return token;
}

function clientOf(administrator: Fairturn, token: string | null): Fairturn {
  if (token === null) throw new Error('The token was not shown.');
  return new Fairturn({ url: administrator.connection.options.url, token });
}

async function registered(lead: Fairturn, siteIds: readonly string[]): Promise<Study> {
  const study = await lead.studies.create({ name: 'Glove liners (demo, invented data)' });
  const sites = siteIds.map((siteId) => ({ siteId, targetEnrolment: PARTICIPANTS_PER_SITE }));
  const { revision } = await study.saveDraft(linerProtocol(sites));
  const { faults } = await study.checkDraft();
  for (const { pointer, message } of faults) process.stderr.write(`${pointer}: ${message}\n`);
  await study.register({ revision });
  return study;
}

/** A seed of the simulation, for whoever wants to see another run of the same world. */
export function newSeed(): string {
  return randomBytes(4).toString('hex');
}
