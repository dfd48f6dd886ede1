import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { startTestService, type TestService } from '../support/app.ts';

let service: TestService;
const YEAR = 365 * 86_400;

beforeAll(async () => {
  service = await startTestService();
});
afterAll(() => service.close());

const administrator = () => service.as(service.administrator);

async function newLab(name: string): Promise<string> {
  const answer = await administrator().post('/v1/labs', { name });
  expect(answer.status).toBe(201);
  return answer.body.id;
}

async function newLead(labId: string): Promise<{ token: string; id: string; accountId: string }> {
  const account = await administrator().post('/v1/accounts', { name: 'Ada Lead', labId });
  expect(account.status).toBe(201);
  const answer = await administrator().post('/v1/tokens', {
    role: 'study-lead',
    accountId: account.body.id,
    labId,
    label: 'desk',
    lifetimeSeconds: YEAR,
  });
  expect(answer.status).toBe(201);
  return { token: answer.body.token, id: answer.body.id, accountId: account.body.id };
}

describe('labs, sites, stations', () => {
  it('are made by those who may and listed by place', async () => {
    const harbour = await newLab('Harbour lab');
    const ridge = await newLab('Ridge lab');
    const lead = service.as((await newLead(harbour)).token);
    const site = await lead.post(`/v1/labs/${harbour}/sites`, { name: 'Harbour' });
    expect(site.status).toBe(201);
    expect((await lead.post(`/v1/labs/${ridge}/sites`, { name: 'Ridge' })).status).toBe(404);
    const station = await lead.post(`/v1/sites/${site.body.id}/stations`, { name: 'Bench 1' });
    expect(station.body).toMatchObject({ siteId: site.body.id, name: 'Bench 1' });
    const labs = await lead.get('/v1/labs');
    expect(labs.body.items.map((lab: { id: string }) => lab.id)).toEqual([harbour]);
    expect((await lead.get(`/v1/sites?labId=${ridge}`)).status).toBe(404);
  });

  it('refuse a name in use, an unknown field and a missing name, each named', async () => {
    await newLab('Fen lab');
    const again = await administrator().post('/v1/labs', { name: 'Fen lab' });
    expect(again.status).toBe(409);
    expect(again.type).toBe('application/problem+json');
    expect(again.body.type).toBe('/problems/already-exists');
    const wrong = await administrator().post('/v1/labs', { nam: 'Fen' });
    expect(wrong.status).toBe(400);
    const pointers = wrong.body.faults.map((fault: { pointer: string }) => fault.pointer);
    expect(pointers.sort()).toEqual(['/nam', '/name']);
  });

  it('refuse text that cannot be stored, and take ids in either case', async () => {
    const key = { 'idempotency-key': 'half-a-pair' };
    const broken = await administrator().post('/v1/labs', { name: 'Lab \ud800' }, key);
    expect(broken.status).toBe(400);
    expect(broken.body.faults[0].pointer).toBe('/name');
    const lab = await newLab('Either case');
    const lead = service.as((await newLead(lab)).token);
    const site = await lead.post(`/v1/labs/${lab.toUpperCase()}/sites`, { name: 'Quay' });
    expect(site.status).toBe(201);
    expect(site.body.labId).toBe(lab);
  });

  it('come in pages that together hold each once', async () => {
    const lab = await newLab('Paged lab');
    for (let i = 0; i < 7; i += 1) {
      await administrator().post(`/v1/labs/${lab}/sites`, { name: `Site ${i}` });
    }
    const names: string[] = [];
    let cursor: string | null = null;
    do {
      const query: string = cursor === null ? '' : `&cursor=${cursor}`;
      const page = await administrator().get(`/v1/sites?labId=${lab}&limit=3${query}`);
      names.push(...page.body.items.map((site: { name: string }) => site.name));
      cursor = page.body.nextCursor;
    } while (cursor !== null);
    expect(names).toEqual(Array.from({ length: 7 }, (_, i) => `Site ${i}`));
    expect((await administrator().get('/v1/sites?cursor=bm90LW9uZQ')).status).toBe(400);
  });
});

describe('tokens', () => {
  it('are shown once: an idempotent repeat answers without the token', async () => {
    const lab = await newLab('Once lab');
    const account = await administrator().post('/v1/accounts', { name: 'Ada', labId: lab });
    const body = {
      role: 'analyst',
      accountId: account.body.id,
      labId: lab,
      label: 'laptop',
      lifetimeSeconds: 3600,
    };
    const key = { 'idempotency-key': 'one-token' };
    const first = await administrator().post('/v1/tokens', body, key);
    const second = await administrator().post('/v1/tokens', body, key);
    expect(first.body.token).toMatch(/^fairturn_[\w-]{43}$/);
    expect(second.status).toBe(201);
    expect(second.body).toEqual({ ...first.body, token: null });
    const other = await administrator().post('/v1/tokens', { ...body, label: 'desk' }, key);
    expect(other.body.type).toBe('/problems/idempotency-key-reused');
    const stored = await service.database.records.idempotencyAnswer.findMany();
    expect(JSON.stringify(stored)).not.toContain(first.body.token);
  });

  it('do the work of one when the same request comes many times at once', async () => {
    const key = { 'idempotency-key': 'lab-at-once' };
    const answers = await Promise.all(
      Array.from({ length: 20 }, () => administrator().post('/v1/labs', { name: 'At once' }, key)),
    );
    expect(new Set(answers.map((answer) => answer.body.id)).size).toBe(1);
    expect(answers.every((answer) => answer.status === 201)).toBe(true);
  });

  it('end when they expire, are revoked, or their account is closed', async () => {
    const lab = await newLab('Ending lab');
    const revoked = await newLead(lab);
    await administrator().post(`/v1/tokens/${revoked.id}/revocation`);
    expect((await service.as(revoked.token).get('/v1/tokens/own')).status).toBe(401);

    const expired = await newLead(lab);
    await service.database.records.token.update({
      where: { id: expired.id },
      data: { expiresAt: new Date(Date.now() - 1000) },
    });
    expect((await service.as(expired.token).get('/v1/tokens/own')).status).toBe(401);

    const closed = await newLead(lab);
    await administrator().post(`/v1/accounts/${closed.accountId}/closure`);
    expect((await service.as(closed.token).get('/v1/tokens/own')).status).toBe(401);
    const body = { role: 'study-lead', accountId: closed.accountId, labId: lab, label: 'x' };
    const again = await administrator().post('/v1/tokens', { ...body, lifetimeSeconds: 60 });
    expect(again.body.type).toBe('/problems/account-closed');
  });

  it('reach no further than who gives them out', async () => {
    const own = await newLab('Own lab');
    const other = await newLab('Other lab');
    const lead = await newLead(own);
    const asLead = service.as(lead.token);
    const body = { accountId: lead.accountId, label: 'x', lifetimeSeconds: 60 };
    const up = await asLead.post('/v1/tokens', { ...body, role: 'administrator' });
    expect(up.body.type).toBe('/problems/not-permitted');
    const sideways = await asLead.post('/v1/tokens', { ...body, role: 'analyst', labId: other });
    expect(sideways.status).toBe(404);
    const wide = await asLead.post('/v1/tokens', { ...body, role: 'auditor', labId: null });
    expect(wide.body.type).toBe('/problems/not-permitted');
    const stranger = await newLead(other);
    expect((await asLead.post(`/v1/tokens/${stranger.id}/revocation`)).status).toBe(404);
    const borrowed = { ...body, accountId: stranger.accountId, role: 'analyst', labId: own };
    expect((await asLead.post('/v1/tokens', borrowed)).status).toBe(404);
  });

  it('are stored as a hash only', async () => {
    const { token } = await newLead(await newLab('Hash lab'));
    const rows = await service.database.records.token.findMany();
    expect(rows.every((row) => row.hash.length === 32)).toBe(true);
    expect(JSON.stringify(rows)).not.toContain(token);
  });
});

describe('requests', () => {
  it('need a token, and say so as RFC 6750 asks', async () => {
    const answer = await service.as(null).get('/v1/labs');
    expect(answer.status).toBe(401);
    expect(answer.headers['www-authenticate']).toBe('Bearer');
    expect(answer.body.type).toBe('/problems/not-authenticated');
  });

  // published: RFC 9457 section 3: type, title, status, detail, instance; media type section 3
  it('are refused with problem details whose type has a page', async () => {
    const answer = await administrator().get('/v1/nowhere');
    expect(answer.type).toBe('application/problem+json');
    expect(Object.keys(answer.body).sort()).toEqual(
      ['detail', 'instance', 'status', 'title', 'type'].sort(),
    );
    expect(answer.body.status).toBe(answer.status);
    expect(answer.body.instance).toContain(answer.headers['request-id']);
    const page = await service.as(null).get(answer.body.type);
    expect(page.status).toBe(200);
    expect(page.type).toBe('text/html');
  });

  it('are refused when a station names no operator', async () => {
    const lab = await newLab('Operator lab');
    const site = await administrator().post(`/v1/labs/${lab}/sites`, { name: 'S' });
    const station = await administrator().post(`/v1/sites/${site.body.id}/stations`, { name: 'B' });
    const token = await administrator().post('/v1/tokens', {
      role: 'station',
      stationId: station.body.id,
      label: 'bench',
      lifetimeSeconds: 3600,
    });
    const asStation = service.as(token.body.token);
    const url = '/v1/studies/01a231b6-093a-78e2-ac73-6e0fad9a9163/arrivals';
    const bare = await asStation.post(url, { kind: 'new' });
    expect(bare.body.type).toBe('/problems/missing-operator');
    const wrong = await asStation.post(url, { kind: 'new' }, { 'operator-code': 'a b@c' });
    expect(wrong.body.faults[0].pointer).toBe('/headers/operator-code');
  });
});
