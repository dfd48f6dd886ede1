import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { ROLES, type Role } from '#platform/call.ts';
import { type Operation, permissions, permits } from '#server/access/permissions.ts';
import { type Caller, startTestService, type TestService } from '../support/app.ts';
import {
  type ExampleRequest,
  exampleRequests,
  freshStudy,
  type Place,
} from '../support/example-requests.ts';
import { startNodeProgram } from '../support/node-program.ts';

const OPERATIONS = Object.keys(permissions).filter(
  (name): name is Operation => name in permissions,
);

/** What these operations act on stands in no path or body, so no place can be refused. */
const PLACELESS: readonly Operation[] = [
  'createLab',
  'listLabs',
  'listSites',
  'listAccounts',
  'listTokens',
  'getOwnToken',
  'getAuditPublicKey',
  'makeCheckpoint',
  'listCheckpoints',
  'verifyAudit',
  'createStudy',
  'listStudies',
  'previewScheme',
  'estimatePredictability',
];

let service: TestService;
let own: Place;
let ownCallers: Record<Role, Caller>;
let otherCallers: Record<Role, Caller>;
let expired: Caller;
let revoked: Caller;

beforeAll(async () => {
  service = await startTestService();
  const home = await labWithRoles('Own');
  ownCallers = home.callers;
  otherCallers = (await labWithRoles('Other')).callers;
  own = await furnished(home);
  ({ expired, revoked } = await endedTokens(home));
}, 180_000);
afterAll(() => service.close());

interface Home {
  labId: string;
  siteId: string;
  stationId: string;
  accountId: string;
  callers: Record<Role, Caller>;
}

async function made(url: string, body: object): Promise<{ id: string; token: string }> {
  const answer = await service.as(service.administrator).post(url, body);
  if (answer.status !== 201) throw new Error(`${url}: ${answer.text}`);
  return answer.body;
}

/** A lab with one site and station, and a caller of every role with its place there. */
async function labWithRoles(name: string): Promise<Home> {
  const { id: labId } = await made('/v1/labs', { name });
  const { id: siteId } = await made(`/v1/labs/${labId}/sites`, { name: 'Site' });
  const { id: stationId } = await made(`/v1/sites/${siteId}/stations`, { name: 'Bench' });
  const { id: accountId } = await made('/v1/accounts', { name: 'Ada', labId });
  const common = { label: 'walk', lifetimeSeconds: 3600 };
  const caller = async (body: object): Promise<Caller> =>
    service.as((await made('/v1/tokens', { ...common, ...body })).token);
  const station = await made('/v1/tokens', { ...common, role: 'station', stationId });
  return {
    labId,
    siteId,
    stationId,
    accountId,
    callers: {
      administrator: service.as(service.administrator),
      'study-lead': await caller({ role: 'study-lead', accountId, labId }),
      'site-coordinator': await caller({ role: 'site-coordinator', accountId, siteId }),
      station: service.as(station.token, 'OP-7'),
      analyst: await caller({ role: 'analyst', accountId, labId }),
      auditor: await caller({ role: 'auditor', accountId, labId }),
    },
  };
}

/** The lab's study with a participant, an upload, an analysis and a report by a real worker. */
async function furnished(home: Home): Promise<Place> {
  const { administrator, station, 'study-lead': lead } = home.callers;
  const studyId = await freshStudy(lead, home.siteId);
  const place = { ...home, service, administrator, lead, station, studyId };
  const codes: string[] = [];
  let uploadId = '';
  for (let i = 0; i < 6; i += 1) {
    const key = { 'idempotency-key': crypto.randomUUID() };
    const arrival = await station.post(`/v1/studies/${studyId}/arrivals`, { kind: 'new' }, key);
    const { participant, periods } = arrival.body;
    codes.push(participant.code);
    const rows = periods.flatMap(
      ({ period, condition }: { period: number; condition: { key: string } }) =>
        [1, 2].map((repetition) => ({
          participant: participant.code,
          period,
          repetition,
          condition: condition.key,
          recordId: crypto.randomUUID(),
          values: { time: 20 + i + period / 3 + repetition / 7 },
          missing: {},
          startedAt: '2026-11-03T09:00:00Z',
        })),
    );
    const upload = await station.post(`/v1/studies/${studyId}/uploads`, rows, {
      'idempotency-key': crypto.randomUUID(),
    });
    if (upload.status !== 201) throw new Error(upload.text);
    uploadId = upload.body.id;
  }
  const { analysisId, reportId } = await reported(lead, studyId);
  return { ...place, code: codes[0] ?? '', uploadId, analysisId, reportId };
}

/** Requests an analysis, lets a worker process do it, and stops the worker. */
async function reported(lead: Caller, studyId: string) {
  const { body } = await lead.post(`/v1/studies/${studyId}/analyses`, {});
  const worker = startNodeProgram('server/worker.ts', {
    environment: { DATABASE_URL: service.databaseUrl, FAIRTURN_LOG_LEVEL: 'info' },
  });
  for (let waits = 0; waits < 300; waits += 1) {
    const analysis = await lead.get(`/v1/analyses/${body.id}`);
    if (analysis.body.state === 'succeeded') {
      worker.child.kill('SIGTERM');
      await worker.ended;
      return { analysisId: body.id, reportId: analysis.body.reportId };
    }
    await new Promise((resolve) => setTimeout(resolve, 200));
  }
  throw new Error(`The worker did not finish:\n${worker.output()}`);
}

async function endedTokens(home: Home) {
  const body = { role: 'study-lead', accountId: home.accountId, labId: home.labId };
  const first = await made('/v1/tokens', { ...body, label: 'expired', lifetimeSeconds: 60 });
  await service.database.records.token.update({
    where: { id: first.id },
    data: { expiresAt: new Date(Date.now() - 1000) },
  });
  const second = await made('/v1/tokens', { ...body, label: 'revoked', lifetimeSeconds: 600 });
  await service.as(service.administrator).post(`/v1/tokens/${second.id}/revocation`);
  return { expired: service.as(first.token), revoked: service.as(second.token) };
}

function send(caller: Caller, request: ExampleRequest) {
  const { method, url, body, headers } = request;
  if (method === 'GET') return caller.get(url, headers);
  if (method === 'PUT') return caller.put(url, body ?? {}, headers);
  return caller.post(url, body, headers);
}

describe('every operation', () => {
  it.each(OPERATIONS)('%s is open to the roles of the table and to no other', async (operation) => {
    for (const role of ROLES) {
      const answer = await send(ownCallers[role], await exampleRequests[operation](own));
      const what = `${role}: ${answer.status} ${answer.text}`;
      if (permits(role, operation)) {
        expect([200, 201, 202], what).toContain(answer.status);
      } else {
        expect(answer.status, what).toBe(403);
        expect(answer.body.type).toBe('/problems/not-permitted');
      }
    }
  });

  it.each(OPERATIONS)('%s is closed without a token, and to one that ended', async (operation) => {
    const request = await exampleRequests[operation](own);
    for (const caller of [service.as(null), service.as('fairturn_made-up'), expired, revoked]) {
      const answer = await send(caller, request);
      expect(answer.status).toBe(401);
      expect(answer.body.type).toBe('/problems/not-authenticated');
    }
  });

  it.each(OPERATIONS)('%s does not exist for another lab', async (operation) => {
    for (const role of ROLES) {
      if (role === 'administrator' || !permits(role, operation)) continue;
      const answer = await send(otherCallers[role], await exampleRequests[operation](own));
      const what = `${role}: ${answer.status} ${answer.text}`;
      if (PLACELESS.includes(operation)) {
        const seen = answer.text ?? '';
        for (const id of [own.labId, own.siteId, own.accountId, own.studyId]) {
          expect(seen, what).not.toContain(id);
        }
      } else {
        expect(answer.status, what).toBe(404);
      }
    }
  });
});
