import { randomUUID } from 'node:crypto';
import type { ProtocolDocument } from '#server/studies/schemas.ts';
import type { Caller, TestService } from './app.ts';
import { exampleProtocol } from './example-protocol.ts';

/** One site with a caller for its coordinator and for each of its stations. */
export interface TestSite {
  readonly id: string;
  readonly labId: string;
  readonly coordinator: Caller;
  readonly stations: readonly [Caller, Caller];
  /** Tokens of the stations, for tests that call another instance of the app. */
  readonly stationTokens: readonly [string, string];
}

/** Two labs: the first owns Harbour and Ridge, the second Fen. All made through the API. */
export interface ColdStore {
  readonly labId: string;
  readonly otherLabId: string;
  readonly harbour: TestSite;
  readonly ridge: TestSite;
  readonly fen: TestSite;
  readonly lead: Caller;
  readonly analyst: Caller;
  readonly auditor: Caller;
  /** Study lead of the second lab. */
  readonly otherLead: Caller;
}

export async function coldStore(service: TestService): Promise<ColdStore> {
  const suffix = randomUUID().slice(0, 8);
  const lab = await make(service, '/v1/labs', { name: `Cold lab ${suffix}` });
  const otherLab = await make(service, '/v1/labs', { name: `Fen lab ${suffix}` });
  const person = (role: string, labId: string) => personCaller(service, role, labId);
  return {
    labId: lab.id,
    otherLabId: otherLab.id,
    harbour: await newSite(service, lab.id, 'Harbour'),
    ridge: await newSite(service, lab.id, 'Ridge'),
    fen: await newSite(service, otherLab.id, 'Fen'),
    lead: await person('study-lead', lab.id),
    analyst: await person('analyst', lab.id),
    auditor: await person('auditor', lab.id),
    otherLead: await person('study-lead', otherLab.id),
  };
}

/** A site with a coordinator and two stations, each with its operator. */
export async function newSite(
  service: TestService,
  labId: string,
  name: string,
): Promise<TestSite> {
  const site = await make(service, `/v1/labs/${labId}/sites`, { name });
  const tokens: string[] = [];
  for (const bench of ['Bench 1', 'Bench 2']) {
    const station = await make(service, `/v1/sites/${site.id}/stations`, { name: bench });
    const { token } = await make(service, '/v1/tokens', {
      role: 'station',
      stationId: station.id,
      label: bench,
      lifetimeSeconds: 86_400,
    });
    tokens.push(token ?? '');
  }
  const account = await make(service, '/v1/accounts', { name: `Coordinator ${name}`, labId });
  const coordinator = await make(service, '/v1/tokens', {
    role: 'site-coordinator',
    accountId: account.id,
    siteId: site.id,
    label: 'coordinator',
    lifetimeSeconds: 86_400,
  });
  const [first = '', second = ''] = tokens;
  return {
    id: site.id,
    labId,
    coordinator: service.as(coordinator.token ?? ''),
    stations: [service.as(first, 'op-1'), service.as(second, 'op-2')],
    stationTokens: [first, second],
  };
}

export async function personCaller(
  service: TestService,
  role: string,
  labId: string,
): Promise<Caller> {
  const account = await make(service, '/v1/accounts', { name: `A ${role}`, labId });
  const { token } = await make(service, '/v1/tokens', {
    role,
    accountId: account.id,
    labId,
    label: role,
    lifetimeSeconds: 86_400,
  });
  return service.as(token ?? '');
}

/** A study with a draft of this protocol, not yet registered. */
export async function draftStudy(lead: Caller, protocol: ProtocolDocument): Promise<string> {
  const study = await lead.post('/v1/studies', { name: `Study ${randomUUID()}` });
  if (study.status !== 201) throw new Error(study.text);
  const draft = { revision: 0, protocol };
  const saved = await lead.put(`/v1/studies/${study.body.id}/protocol-draft`, draft);
  if (saved.status !== 200) throw new Error(saved.text);
  return study.body.id;
}

/** A study that enrols under this protocol. */
export async function openStudy(lead: Caller, protocol: ProtocolDocument): Promise<string> {
  const studyId = await draftStudy(lead, protocol);
  const path = `/v1/studies/${studyId}/protocol-versions`;
  const registered = await lead.post(path, { revision: 1 });
  if (registered.status !== 201) throw new Error(registered.text);
  return studyId;
}

/** The example protocol at all three sites. */
export function coldStoreProtocol(places: ColdStore, targetEnrolment = 16): ProtocolDocument {
  const { harbour, ridge, fen } = places;
  return exampleProtocol([harbour, ridge, fen].map(({ id }) => ({ siteId: id, targetEnrolment })));
}

/** Amends the protocol with a new version. */
export async function amend(
  lead: Caller,
  studyId: string,
  protocol: ProtocolDocument,
): Promise<void> {
  const path = `/v1/studies/${studyId}`;
  const saved = await lead.put(`${path}/protocol-draft`, { revision: 0, protocol });
  if (saved.status !== 200) throw new Error(saved.text);
  const body = { revision: 1, reason: 'The safety board asked for it.' };
  const registered = await lead.post(`${path}/protocol-versions`, body);
  if (registered.status !== 201) throw new Error(registered.text);
}

/** Checks somebody new in; the answer as it comes. */
export function arriveNew(
  station: Caller,
  studyId: string,
  arrival: { code?: string; stratum?: Record<string, string>; key?: string } = {},
) {
  const { code, stratum = { shift: 'early' }, key = randomUUID() } = arrival;
  return station.post(
    `/v1/studies/${studyId}/arrivals`,
    { kind: 'new', ...(code === undefined ? {} : { code }), stratum },
    { 'idempotency-key': key },
  );
}

async function make(
  service: TestService,
  url: string,
  body: object,
): Promise<{ id: string; token?: string }> {
  const answer = await service.as(service.administrator).post(url, body);
  if (answer.status !== 201) throw new Error(`${url}: ${answer.status} ${answer.text}`);
  return answer.body;
}
