import { createHash } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { startTestService, type TestService } from '../support/app.ts';
import {
  amend,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  draftStudy,
  openStudy,
} from '../support/cold-store.ts';

let service: TestService;
let places: ColdStore;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
});
afterAll(() => service.close());

const pathOf = (studyId: string, rest = '') => `/v1/studies/${studyId}${rest}`;
const key = (name: string) => ({ 'idempotency-key': name });

async function actions(studyId: string): Promise<string[]> {
  const answer = await places.lead.get(`/v1/audit/chains/${studyId}/entries?limit=500`);
  return answer.body.items.map((item: { content: string }) => JSON.parse(item.content).action);
}

describe('a study', () => {
  it('is made by a lead, once a key, and named once in its lab', async () => {
    const first = await places.lead.post('/v1/studies', { name: 'Liners' }, key('study-1'));
    expect(first.status).toBe(201);
    expect(first.body).toMatchObject({
      labId: places.labId,
      name: 'Liners',
      state: 'draft',
      currentVersion: null,
      secretHash: null,
      closedAt: null,
    });
    const again = await places.lead.post('/v1/studies', { name: 'Liners' }, key('study-1'));
    expect(again.body).toEqual(first.body);
    const reused = await places.lead.post('/v1/studies', { name: 'Others' }, key('study-1'));
    expect([reused.status, reused.body.type]).toEqual([409, '/problems/idempotency-key-reused']);
    const named = await places.lead.post('/v1/studies', { name: 'Liners' });
    expect([named.status, named.body.type]).toEqual([409, '/problems/already-exists']);
    const elsewhere = await places.otherLead.post('/v1/studies', { name: 'Liners' });
    expect(elsewhere.status).toBe(201);
    expect(await actions(first.body.id)).toEqual(['study-created']);
  });

  it('made by two requests with one key at once is one study', async () => {
    const send = () => places.lead.post('/v1/studies', { name: 'Twice' }, key('study-twice'));
    const [one, two] = await Promise.all([send(), send()]);
    expect([one?.status, two?.status]).toEqual([201, 201]);
    expect(one?.body.id).toBe(two?.body.id);
  });

  it('is seen by its lab, by its sites and by the service, and by nobody else', async () => {
    const draft = await draftStudy(places.lead, coldStoreProtocol(places));
    const protocol = coldStoreProtocol(places);
    protocol.sites = protocol.sites.filter(({ siteId }) => siteId !== places.fen.id);
    const studyId = await openStudy(places.lead, protocol);
    const administrator = service.as(service.administrator);
    for (const caller of [places.lead, places.analyst, places.auditor, administrator]) {
      expect((await caller.get(pathOf(studyId))).status).toBe(200);
      expect((await caller.get(pathOf(draft))).status).toBe(200);
    }
    for (const caller of [places.harbour.coordinator, places.ridge.stations[0]]) {
      expect((await caller.get(pathOf(studyId))).status).toBe(200);
      expect((await caller.get(pathOf(draft))).status).toBe(404);
      const list = await caller.get('/v1/studies?limit=500');
      const ids = list.body.items.map((item: { id: string }) => item.id);
      expect(ids).toContain(studyId);
      expect(ids).not.toContain(draft);
    }
    for (const caller of [places.otherLead, places.fen.coordinator, places.fen.stations[0]]) {
      const answer = await caller.get(pathOf(studyId));
      expect([answer.status, answer.body.type]).toEqual([404, '/problems/not-found']);
      const list = await caller.get('/v1/studies?limit=500');
      expect(list.body.items.map((item: { id: string }) => item.id)).not.toContain(studyId);
    }
    const { otherLead } = places;
    for (const refused of [
      await otherLead.get(pathOf(studyId, '/protocol-draft')),
      await otherLead.put(pathOf(studyId, '/protocol-draft'), { revision: 0, protocol }),
      await otherLead.post(pathOf(studyId, '/protocol-draft/check')),
      await otherLead.post(pathOf(studyId, '/protocol-versions'), { revision: 1 }),
      await otherLead.get(pathOf(studyId, '/protocol-versions')),
      await otherLead.get(pathOf(studyId, '/protocol-versions/1')),
      await otherLead.post(pathOf(studyId, '/pause'), {}),
      await otherLead.post(pathOf(studyId, '/closure'), {}),
      await otherLead.get(pathOf(studyId, '/allocation-secret')),
      await otherLead.get(`/v1/audit/chains/${studyId}/entries`),
    ]) {
      expect([refused.status, refused.body.type]).toEqual([404, '/problems/not-found']);
    }
  });

  it('is listed in pages that hold each once', async () => {
    const ids: string[] = [];
    let query = '?limit=2';
    for (let pages = 0; pages < 50 && query !== ''; pages += 1) {
      const page = await places.lead.get(`/v1/studies${query}`);
      expect(page.body.items.length).toBeLessThanOrEqual(2);
      ids.push(...page.body.items.map((item: { id: string }) => item.id));
      query = page.body.nextCursor === null ? '' : `?limit=2&cursor=${page.body.nextCursor}`;
    }
    const all = await places.lead.get('/v1/studies?limit=500');
    expect(ids).toEqual(all.body.items.map((item: { id: string }) => item.id));
    expect(new Set(ids).size).toBe(ids.length);
  });
});

describe('a draft', () => {
  it('is saved with its faults, in place of the revision it names', async () => {
    const protocol = coldStoreProtocol(places);
    const studyId = (await places.lead.post('/v1/studies', { name: 'Drafted' })).body.id;
    const path = pathOf(studyId, '/protocol-draft');
    const none = await places.lead.get(path);
    expect([none.status, none.body.type]).toEqual([409, '/problems/no-draft']);
    const faulty = { ...protocol, title: '' };
    const first = await places.lead.put(path, { revision: 0, protocol: faulty });
    expect(first.body).toEqual({ number: 1, revision: 1 });
    const read = await places.lead.get(path);
    expect(read.body).toMatchObject({ number: 1, revision: 1, protocol: faulty });
    const stale = await places.lead.put(path, { revision: 0, protocol });
    expect([stale.status, stale.body.type]).toEqual([409, '/problems/revision-conflict']);
    const second = await places.lead.put(path, { revision: 1, protocol });
    expect(second.body).toEqual({ number: 1, revision: 2 });
    const check = await places.lead.post(`${path}/check`);
    expect(check.body).toEqual({ revision: 2, registrable: true, faults: [] });
  });

  it('saved twice at once is saved once', async () => {
    const protocol = coldStoreProtocol(places);
    const studyId = await draftStudy(places.lead, protocol);
    const path = pathOf(studyId, '/protocol-draft');
    const statuses = await Promise.all(
      [1, 2, 3].map(async () => (await places.lead.put(path, { revision: 1, protocol })).status),
    );
    expect(statuses.sort()).toEqual([200, 409, 409]);
  });

  it('of another shape is refused with a pointer to each fault', async () => {
    const studyId = (await places.lead.post('/v1/studies', { name: 'Shapes' })).body.id;
    const { title: _title, ...untitled } = coldStoreProtocol(places);
    const protocol = {
      ...untitled,
      rationale: 'a\u0000b',
      colour: 'red',
      scheme: { kind: 'random' },
      periods: { ...untitled.periods, count: 2.5 },
    };
    const answer = await places.lead.put(pathOf(studyId, '/protocol-draft'), {
      revision: 0,
      protocol,
    });
    expect([answer.status, answer.body.type]).toEqual([400, '/problems/invalid-request']);
    const pointers = answer.body.faults.map((fault: { pointer: string }) => fault.pointer).sort();
    expect(pointers).toEqual([
      '/protocol/colour',
      '/protocol/periods/count',
      '/protocol/rationale',
      '/protocol/scheme/kind',
      '/protocol/title',
    ]);
  });
});

describe('registering', () => {
  it('names every fault at once, with pointers into the protocol', async () => {
    const protocol = coldStoreProtocol(places);
    const missing = '01990000-0000-7000-8000-000000000000';
    protocol.sites.push({ siteId: missing, targetEnrolment: 3 });
    protocol.periods.count = 3;
    protocol.analysis.measures[1]!.measure = 'grip';
    protocol.measures[3]!.points = null;
    protocol.analysis.measures[0]!.contrasts = { kind: 'against-reference', reference: 'wool' };
    const studyId = await draftStudy(places.lead, protocol);
    const check = await places.lead.post(pathOf(studyId, '/protocol-draft/check'));
    expect(check.body.registrable).toBe(false);
    const answer = await places.lead.post(pathOf(studyId, '/protocol-versions'), { revision: 1 });
    expect([answer.status, answer.body.type]).toEqual([422, '/problems/protocol-not-registrable']);
    expect(answer.body.faults).toEqual(check.body.faults);
    const pointers = answer.body.faults.map((fault: { pointer: string }) => fault.pointer);
    for (const pointer of [
      '/scheme',
      '/sites/3/siteId',
      '/analysis/measures/1/measure',
      '/measures/3/points',
      '/analysis/measures/0/contrasts/reference',
    ]) {
      expect(pointers).toContain(pointer);
    }
    expect((await places.lead.get(pathOf(studyId))).body.state).toBe('draft');
  });

  it('refuses a plan whose comparisons the sequences cannot make', async () => {
    const protocol = coldStoreProtocol(places);
    const row = ['none', 'silk', 'merino', 'fleece'];
    protocol.scheme = { kind: 'custom-list', sequences: [row] };
    const studyId = await draftStudy(places.lead, protocol);
    const check = await places.lead.post(pathOf(studyId, '/protocol-draft/check'));
    const adjusted = protocol.analysis.measures.flatMap(({ primaryEstimate }, index) =>
      primaryEstimate === 'adjusted-for-period' ? [`/analysis/measures/${index}/contrasts`] : [],
    );
    expect(adjusted).not.toEqual([]);
    // By hand: in a single order condition and period are one and the same.
    const found = check.body.faults.map(({ pointer, code }: Record<string, string>) => [
      pointer,
      code,
    ]);
    expect(found).toEqual(adjusted.map((pointer) => [pointer, 'contrast-not-estimable']));
  });

  it('fixes the version, publishes its hash and opens enrolment, once a key', async () => {
    const protocol = coldStoreProtocol(places);
    const studyId = await draftStudy(places.lead, protocol);
    const path = pathOf(studyId, '/protocol-versions');
    const stale = await places.lead.post(path, { revision: 7 });
    expect([stale.status, stale.body.type]).toEqual([409, '/problems/revision-conflict']);
    const send = () => places.lead.post(path, { revision: 1 }, key(`register-${studyId}`));
    const [one, two] = await Promise.all([send(), send()]);
    expect([one.status, two.status]).toEqual([201, 201]);
    expect(two.body).toEqual(one.body);
    expect(one.body).toMatchObject({ studyId, number: 1, reason: null, protocol });
    // reference: RFC 8785 for ASCII member names is JSON with members sorted, hashed by node:crypto.
    const sha256 = createHash('sha256').update(sortedJson(one.body.protocol)).digest('hex');
    expect(one.body.sha256).toBe(sha256);
    const study = (await places.lead.get(pathOf(studyId))).body;
    expect(study).toMatchObject({ state: 'enrolling', currentVersion: 1 });
    expect(study.secretHash).toMatch(/^[0-9a-f]{64}$/);
    const draft = await places.lead.post(path, { revision: 1 });
    expect([draft.status, draft.body.type]).toEqual([409, '/problems/no-draft']);
    const versions = await places.harbour.coordinator.get(path);
    expect(versions.body.items).toHaveLength(1);
    expect(versions.body.items[0]).not.toHaveProperty('protocol');
    const version = await places.harbour.coordinator.get(`${path}/1`);
    expect(version.body).toEqual(one.body);
    expect((await places.lead.get(`${path}/2`)).status).toBe(404);
  });

  it('leaves a row that the database itself refuses to change', async () => {
    const studyId = await openStudy(places.lead, coldStoreProtocol(places));
    const { sql } = service.database;
    const refusal = /is refused: its rows are immutable/;
    await expect(
      sql`update protocol_versions set document = '{}' where study_id = ${studyId}`,
    ).rejects.toThrow(refusal);
    await expect(
      sql`update protocol_versions set state = 'draft' where study_id = ${studyId}`,
    ).rejects.toThrow(refusal);
    await expect(sql`delete from protocol_versions where study_id = ${studyId}`).rejects.toThrow(
      refusal,
    );
  });

  it('amends only with a reason, adds sites and leaves others out', async () => {
    const protocol = coldStoreProtocol(places);
    protocol.sites = protocol.sites.filter(({ siteId }) => siteId !== places.fen.id);
    const studyId = await openStudy(places.lead, protocol);
    const next = coldStoreProtocol(places);
    next.sites = next.sites.filter(({ siteId }) => siteId !== places.ridge.id);
    const draft = { revision: 0, protocol: next };
    const saved = await places.lead.put(pathOf(studyId, '/protocol-draft'), draft);
    expect(saved.body).toEqual({ number: 2, revision: 1 });
    const path = pathOf(studyId, '/protocol-versions');
    const silent = await places.lead.post(path, { revision: 1 });
    expect([silent.status, silent.body.type]).toEqual([422, '/problems/reason-needed']);
    const reason = 'Fen joins, Ridge has closed its cold room.';
    const second = await places.lead.post(path, { revision: 1, reason });
    expect(second.body).toMatchObject({ number: 2, reason });
    expect((await places.fen.coordinator.get(pathOf(studyId))).body.currentVersion).toBe(2);
    expect((await places.ridge.coordinator.get(pathOf(studyId))).status).toBe(200);
    const rows = await service.database.sql`
      select target_enrolment from study_sites
      where study_id = ${studyId} and site_id = ${places.ridge.id}`;
    expect(rows[0]?.target_enrolment).toBe(0);
    const page = await places.lead.get(`${path}?limit=1`);
    expect(page.body.items.map((item: { number: number }) => item.number)).toEqual([1]);
    const rest = await places.lead.get(`${path}?limit=1&cursor=${page.body.nextCursor}`);
    expect(rest.body.items.map((item: { number: number }) => item.number)).toEqual([2]);
    expect(rest.body.nextCursor).toBeNull();
    // Free text stands in the log as a commitment only.
    const log = await places.lead.get(`/v1/audit/chains/${studyId}/entries`);
    expect(JSON.stringify(log.body)).not.toContain('cold room');
    const verification = await places.lead.post('/v1/audit/verifications', {});
    expect(verification.body).toMatchObject({ intact: true, faults: [] });
  });
});

describe('states', () => {
  it('go from enrolling to paused and back, and end closed', async () => {
    const studyId = await draftStudy(places.lead, coldStoreProtocol(places));
    const change = (to: string, name?: string) =>
      places.lead.post(
        pathOf(studyId, `/${to}`),
        { reason: 'The cold room is being mended.' },
        name === undefined ? {} : key(name),
      );
    for (const to of ['pause', 'resume', 'closure']) {
      const early = await change(to);
      expect([to, early.status, early.body.type]).toEqual([to, 409, '/problems/wrong-state']);
    }
    await places.lead.post(pathOf(studyId, '/protocol-versions'), { revision: 1 });
    expect((await change('pause', `pause-${studyId}`)).body.state).toBe('paused');
    expect((await change('pause', `pause-${studyId}`)).body.state).toBe('paused');
    expect((await change('pause')).status).toBe(409);
    expect((await change('resume')).body.state).toBe('enrolling');
    expect((await change('resume')).status).toBe(409);
    const secret = await places.auditor.get(pathOf(studyId, '/allocation-secret'));
    expect([secret.status, secret.body.type]).toEqual([409, '/problems/wrong-state']);
    const closed = await change('closure');
    expect(closed.body.state).toBe('closed');
    expect(closed.body.closedAt).not.toBeNull();
    for (const to of ['pause', 'resume', 'closure']) expect((await change(to)).status).toBe(409);
    const protocol = coldStoreProtocol(places);
    const late = await places.lead.put(pathOf(studyId, '/protocol-draft'), {
      revision: 0,
      protocol,
    });
    expect([late.status, late.body.type]).toEqual([409, '/problems/wrong-state']);
    expect(await actions(studyId)).toEqual([
      'study-created',
      'draft-saved',
      'protocol-registered',
      'study-paused',
      'study-resumed',
      'study-closed',
    ]);
  });

  it('reveal the secret once closed, by its published hash, and log who read it', async () => {
    const studyId = await openStudy(places.lead, coldStoreProtocol(places));
    const published = (await places.lead.get(pathOf(studyId))).body.secretHash;
    await places.lead.post(pathOf(studyId, '/closure'), {});
    const answer = await places.auditor.get(pathOf(studyId, '/allocation-secret'));
    expect(answer.status).toBe(200);
    expect(answer.body.secretHash).toBe(published);
    const bytes = Buffer.from(answer.body.secret, 'hex');
    expect(bytes).toHaveLength(32);
    expect(createHash('sha256').update(bytes).digest('hex')).toBe(published);
    expect((await actions(studyId)).at(-1)).toBe('allocation-secret-revealed');
  });

  it('stay as they are when the protocol is amended', async () => {
    const studyId = await openStudy(places.lead, coldStoreProtocol(places));
    await places.lead.post(pathOf(studyId, '/pause'), {});
    await amend(places.lead, studyId, coldStoreProtocol(places, 20));
    const study = (await places.lead.get(pathOf(studyId))).body;
    expect(study).toMatchObject({ state: 'paused', currentVersion: 2 });
  });
});

describe('a scheme preview', () => {
  const factor = (levels: string[]) => [
    { key: 'liner', label: 'Liner', levels: levels.map((level) => ({ key: level, label: level })) },
  ];

  it('shows sequences, counts and whole blocks', async () => {
    const answer = await places.lead.post('/v1/scheme-previews', {
      withinFactors: factor(['a', 'b', 'c', 'd']),
      scheme: { kind: 'williams' },
      periods: 4,
      targetEnrolments: [0, 4, 17],
    });
    expect(answer.status).toBe(200);
    // published: Williams 1949, a square of 4 balanced for first-order carryover: every condition
    // once in every period, every ordered pair of different conditions once.
    expect(answer.body.participantsPerBlock).toBe(4);
    expect(answer.body.sequences).toHaveLength(4);
    for (const { counts } of answer.body.conditionByPeriod) expect(counts).toEqual([1, 1, 1, 1]);
    for (const { first, second, count } of answer.body.orderedPairs) {
      expect(count).toBe(first === second ? 0 : 1);
    }
    expect(answer.body).toMatchObject({ uniformOnPeriods: true, carryoverBalanced: true });
    expect(answer.body.lags).toHaveLength(3);
    expect(answer.body.lags[0]).toEqual({ lag: 1, balanced: true, stronglyBalanced: false });
    // published: Jones & Kenward, Design and Analysis of Cross-Over Trials, chapter 4: 90.91 % and
    // 62.50 %, and full efficiency without carryover.
    const { direct, directAdjusted, carryover } = answer.body.efficiency;
    expect(direct.efficiency).toBeCloseTo(1, 12);
    expect((100 * directAdjusted.efficiency).toFixed(2)).toBe('90.91');
    expect(carryover).toEqual({ efficiency: expect.closeTo(0.625, 12), notEstimable: [] });
    expect(answer.body.targets).toEqual([
      { targetEnrolment: 0, blocks: 0, participants: 0, aboveTarget: 0 },
      { targetEnrolment: 4, blocks: 1, participants: 4, aboveTarget: 0 },
      { targetEnrolment: 17, blocks: 5, participants: 20, aboveTarget: 3 },
    ]);
  });

  it('builds a scheme on a base', async () => {
    const answer = await places.lead.post('/v1/scheme-previews', {
      withinFactors: factor(['a', 'b', 'c']),
      scheme: { kind: 'extra-period', base: 'williams' },
      periods: 4,
    });
    expect(answer.status).toBe(200);
    // published: Lucas 1957, Journal of Dairy Science 40:225–239: strongly balanced
    expect(answer.body.sequences[0].conditions).toEqual(['a', 'b', 'c', 'c']);
    expect(answer.body).toMatchObject({
      carryoverBalanced: false,
      stronglyCarryoverBalanced: true,
      uniformWithinSequences: false,
    });
    const refused = await places.lead.post('/v1/scheme-previews', {
      withinFactors: factor(['a', 'b', 'c']),
      scheme: { kind: 'extra-period', base: 'cyclic-latin-square' },
      periods: 4,
    });
    expect([refused.status, refused.body.type]).toEqual([400, '/problems/invalid-request']);
  });

  it('builds incomplete blocks and constrained, nested and random orders', async () => {
    const preview = (scheme: object, levels: string[], periods: number) =>
      places.lead.post('/v1/scheme-previews', { withinFactors: factor(levels), scheme, periods });
    const seven = ['a', 'b', 'c', 'd', 'e', 'f', 'g'];
    const incomplete = { kind: 'balanced-incomplete-blocks', carryoverBalanced: false };
    const youden = await preview(incomplete, seven, 3);
    // published: Cochran & Cox, Experimental Designs, §9.3: t = b = 7, k = r = 3, λ = 1, E = 7/9
    expect([youden.status, youden.body.participantsPerBlock]).toEqual([200, 7]);
    expect(youden.body.efficiency.direct.efficiency).toBeCloseTo(7 / 9, 12);
    const seed = '00000000000000ff';
    const generator = { name: 'philox4x32-10', version: 1 };
    const random = { kind: 'random-permutations', count: 9, seed, generator };
    const drawn = await preview(random, seven, 7);
    expect([drawn.status, drawn.body.sequences.length]).toEqual([200, 9]);
    const first = { kind: 'familiarisation-first', condition: 'b' };
    const constrained = { kind: 'constrained-permutations', constraints: [first] };
    const orders = await preview(constrained, ['a', 'b', 'c'], 3);
    expect(
      orders.body.sequences.map(({ conditions }: { conditions: string[] }) => conditions),
    ).toEqual([
      ['b', 'a', 'c'],
      ['b', 'c', 'a'],
    ]);
    const nested = {
      kind: 'nested',
      blockedFactor: 1,
      blocks: 'williams',
      insideBlocks: 'williams',
    };
    const one = await preview(nested, ['a', 'b', 'c'], 3);
    expect([one.status, one.body.faults[0].code]).toEqual([422, 'scheme-needs-two-factors']);
  });

  it('says which conditions the sequences cannot compare', async () => {
    const answer = await places.lead.post('/v1/scheme-previews', {
      withinFactors: factor(['a', 'b', 'c', 'd']),
      scheme: {
        kind: 'custom-list',
        sequences: [
          ['a', 'b'],
          ['b', 'a'],
          ['c', 'd'],
          ['d', 'c'],
        ],
      },
      periods: 2,
    });
    expect(answer.status).toBe(200);
    expect(answer.body.efficiency.direct).toEqual({
      efficiency: null,
      notEstimable: [
        { first: 'a', second: 'c' },
        { first: 'a', second: 'd' },
        { first: 'b', second: 'c' },
        { first: 'b', second: 'd' },
      ],
    });
  });

  it('names every fault of what cannot be built', async () => {
    const answer = await places.lead.post('/v1/scheme-previews', {
      withinFactors: factor(['a', 'b', 'B']),
      scheme: { kind: 'custom-list', sequences: [['a', 'x'], ['b']] },
      periods: 2,
    });
    expect([answer.status, answer.body.type]).toEqual([422, '/problems/protocol-not-registrable']);
    const pointers = answer.body.faults.map((fault: { pointer: string }) => fault.pointer);
    for (const pointer of [
      '/withinFactors/0/levels/2/key',
      '/scheme/sequences/0/1',
      '/scheme/sequences/1',
    ]) {
      expect(pointers).toContain(pointer);
    }
  });
});

/** Members sorted, no white space: canonical for documents of ASCII names and plain numbers. */
function sortedJson(value: unknown): string {
  return JSON.stringify(value, (_name, member: unknown) =>
    typeof member === 'object' && member !== null && !Array.isArray(member)
      ? Object.fromEntries(Object.entries(member).sort(([a], [b]) => (a < b ? -1 : 1)))
      : member,
  );
}
