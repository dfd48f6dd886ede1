import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { checkCharacterHolds } from '#core/allocation/participant-code.ts';
import { eraseParticipantRecords } from '#server/allocations/service.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  openStudy,
} from '../support/cold-store.ts';

let service: TestService;
let places: ColdStore;
let studyId: string;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
  studyId = await openStudy(places.lead, coldStoreProtocol(places, 60));
});
afterAll(() => service.close());

const problemOf = (answer: { status: number; body: { type?: string } }) => [
  answer.status,
  answer.body.type?.replace('/problems/', ''),
];

const returning = (station: ColdStore['lead'], code: string, study = studyId) =>
  station.post(`/v1/studies/${study}/arrivals`, { kind: 'returning', code });

describe('an arrival', () => {
  it('of somebody new answers slot, sequence by period with labels, version and time', async () => {
    const [station] = places.harbour.stations;
    const before = Date.now();
    const answer = await arriveNew(station, studyId, { code: 'H-01' });
    expect(answer.status).toBe(201);
    expect(answer.body).toMatchObject({
      participant: { code: 'H-01' },
      siteId: places.harbour.id,
      slotNumber: 1,
      stratum: 'early',
      protocolVersion: 1,
      replacement: false,
      washout: { minimum: 'PT20M', maximum: 'P14D' },
    });
    expect(Date.parse(answer.body.arrivedAt)).toBeGreaterThanOrEqual(before - 1);
    const periods: { period: number; visit: number; condition: { key: string; label: string } }[] =
      answer.body.periods;
    expect(periods.map(({ period, visit }) => [period, visit])).toEqual([
      [1, 1],
      [2, 1],
      [3, 2],
      [4, 2],
    ]);
    expect(periods.map(({ condition }) => condition.key).sort()).toEqual([
      'fleece',
      'merino',
      'none',
      'silk',
    ]);
    for (const { condition } of periods) expect(condition.label).not.toBe(condition.key);
  });

  it('of somebody returning answers the same, at any station of the site', async () => {
    const first = await arriveNew(places.harbour.stations[0], studyId, { code: 'H-02' });
    const again = await returning(places.harbour.stations[1], 'h-02');
    expect(again.status).toBe(200);
    expect(again.body).toEqual(first.body);
  });

  it('needs an Idempotency-Key when new, and an operator', async () => {
    const body = { kind: 'new', code: 'H-03', stratum: { shift: 'early' } };
    const url = `/v1/studies/${studyId}/arrivals`;
    expect(problemOf(await places.harbour.stations[0].post(url, body))).toEqual([
      400,
      'missing-idempotency-key',
    ]);
    const [token] = places.harbour.stationTokens;
    const unnamed = await service.as(token).post(url, body, { 'idempotency-key': 'k' });
    expect(problemOf(unnamed)).toEqual([400, 'missing-operator']);
  });

  it('repeated with its key is the first answer; another body is refused', async () => {
    const [station] = places.ridge.stations;
    const arrival = { code: 'R-01', key: 'ridge-1' };
    const first = await arriveNew(station, studyId, arrival);
    const repeats = await Promise.all([1, 2, 3].map(() => arriveNew(station, studyId, arrival)));
    for (const repeat of repeats) {
      expect(repeat.status).toBe(201);
      expect(repeat.body).toEqual(first.body);
    }
    const other = await arriveNew(station, studyId, { code: 'R-02', key: 'ridge-1' });
    expect(problemOf(other)).toEqual([409, 'idempotency-key-reused']);
    const list = await places.ridge.coordinator.get(`/v1/studies/${studyId}/participants`);
    expect(list.body.items).toHaveLength(1);
  });

  it('typed twice as new is noticed, at its own and at another site', async () => {
    await arriveNew(places.harbour.stations[0], studyId, { code: 'P07' });
    for (const station of [places.harbour.stations[1], places.fen.stations[0]]) {
      const second = await arriveNew(station, studyId, { code: 'p07' });
      expect(problemOf(second)).toEqual([409, 'participant-known']);
      expect(JSON.stringify(second.body)).not.toContain(places.harbour.id);
    }
  });

  it('sent twice at once with different keys is one participant', async () => {
    const [one, two] = await Promise.all(
      places.harbour.stations.map((station) => arriveNew(station, studyId, { code: 'TWIN' })),
    );
    expect([one?.status, two?.status].sort()).toEqual([201, 409]);
  });

  it('without a code gets one whose check character finds slips', async () => {
    const [station] = places.fen.stations;
    const first = await arriveNew(station, studyId, { key: 'fen-issued' });
    const { code } = first.body.participant;
    expect(code).toMatch(/^[A-Z][A-Z2-9]{7}$/);
    expect(checkCharacterHolds(code)).toBe(true);
    const repeat = await arriveNew(station, studyId, { key: 'fen-issued' });
    expect(repeat.body).toEqual(first.body);
    expect((await returning(station, code.toLowerCase())).status).toBe(200);
    const wrong = code.startsWith('A') ? `B${code.slice(1)}` : `A${code.slice(1)}`;
    expect(problemOf(await returning(station, wrong))).toEqual([422, 'code-check-failed']);
  });

  it('refuses what looks like a contact detail, and what is no code', async () => {
    const [station] = places.harbour.stations;
    for (const code of ['ada@example.org', '0171 555 0123', '+49 171 5550123']) {
      const refused = await arriveNew(station, studyId, { code });
      expect(problemOf(refused)).toEqual([422, 'code-not-pseudonymous']);
      expect(refused.text).not.toContain(code);
      expect(problemOf(await returning(station, code))).toEqual([422, 'code-not-pseudonymous']);
    }
    for (const code of ['P 07', 'Zoë', '0199abcd-0000-7000-8000-00000000000f', 'x'.repeat(41)]) {
      const refused = await arriveNew(station, studyId, { code });
      expect(problemOf(refused)).toEqual([400, 'invalid-request']);
      expect(refused.body.faults[0].pointer).toBe('/code');
    }
  });

  it('refuses a stratum that the protocol does not have, naming each fault', async () => {
    const [station] = places.harbour.stations;
    const cases: { stratum: Record<string, string>; pointers: string[] }[] = [
      { stratum: {}, pointers: ['/stratum/shift'] },
      { stratum: { shift: 'night' }, pointers: ['/stratum/shift'] },
      { stratum: { shift: 'early', hand: 'left' }, pointers: ['/stratum'] },
      { stratum: { constructor: 'early' }, pointers: ['/stratum/shift', '/stratum'] },
    ];
    for (const { stratum, pointers } of cases) {
      const refused = await arriveNew(station, studyId, { stratum });
      expect(problemOf(refused)).toEqual([422, 'stratum-unknown']);
      expect(refused.body.faults.map((fault: { pointer: string }) => fault.pointer)).toEqual(
        pointers,
      );
    }
  });

  it('of another site or of nobody is unknown', async () => {
    await arriveNew(places.harbour.stations[0], studyId, { code: 'H-ONLY' });
    const [fen] = places.fen.stations;
    const path = `/v1/studies/${studyId}/participants/H-ONLY`;
    const withdrawal = { reasonCode: 'own-wish', periodReached: 0 };
    for (const refused of [
      await returning(fen, 'H-ONLY'),
      await returning(fen, 'nobody'),
      await fen.get(`/v1/studies/${studyId}/participants/%20/due`),
      await fen.get(`${path}/due`),
      await fen.post(`${path}/period-starts`, { period: 1 }),
      await fen.post(`${path}/withdrawal`, withdrawal),
      await places.fen.coordinator.get(path),
      await places.fen.coordinator.post(`${path}/void`, { reason: 'A slip.' }),
      await places.fen.coordinator.post(`${path}/withdrawal`, withdrawal),
    ]) {
      expect(problemOf(refused)).toEqual([404, 'participant-unknown']);
    }
    expect(problemOf(await places.otherLead.get(path))).toEqual([404, 'not-found']);
  });

  it('with a code in the path that no text can hold is refused as such', async () => {
    const path = `/v1/studies/${studyId}/participants/a%00b/due`;
    const refused = await places.harbour.stations[0].get(path);
    expect(problemOf(refused)).toEqual([400, 'invalid-request']);
    expect(refused.body.faults[0].pointer).toBe('/path/code');
  });

  it('is refused while paused and once closed, and goes on for those who return', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places));
    const [station] = places.harbour.stations;
    await arriveNew(station, own, { code: 'A1', key: 'before-pause' });
    for (const to of ['pause', 'closure']) {
      await places.lead.post(`/v1/studies/${own}/${to}`, {});
      expect(problemOf(await arriveNew(station, own, { code: 'A2' }))).toEqual([
        409,
        'wrong-state',
      ]);
      expect((await returning(station, 'A1', own)).status).toBe(200);
      const repeat = await arriveNew(station, own, { code: 'A1', key: 'before-pause' });
      expect(repeat.status).toBe(201);
    }
  });

  it('is refused when the site is full or takes no part', async () => {
    const protocol = coldStoreProtocol(places, 2);
    protocol.sites = protocol.sites.filter(({ siteId }) => siteId !== places.fen.id);
    const own = await openStudy(places.lead, protocol);
    const [station] = places.harbour.stations;
    for (const number of [1, 2]) {
      expect((await arriveNew(station, own)).body.slotNumber).toBe(number);
    }
    expect(problemOf(await arriveNew(station, own))).toEqual([409, 'site-full']);
    expect((await arriveNew(places.ridge.stations[0], own)).status).toBe(201);
    expect(problemOf(await arriveNew(places.fen.stations[0], own))).toEqual([404, 'not-found']);
  });

  it('stands in the log by participant id and commitment, without code or sequence', async () => {
    const answer = await arriveNew(places.ridge.stations[0], studyId, { code: 'SECRETCODE' });
    const log = await places.lead.get(`/v1/audit/chains/${studyId}/entries?limit=500`);
    const entries = log.body.items.map((item: { content: string }) => JSON.parse(item.content));
    const { id } = answer.body.participant;
    const entry = entries.find((one: { subject: string }) => one.subject === id);
    expect(entry).toMatchObject({
      action: 'slot-allocated',
      actor: { role: 'station', operator: 'op-1' },
      details: { slotNumber: answer.body.slotNumber, siteId: places.ridge.id },
    });
    expect(entry.details.code).toMatch(/^[0-9a-f]{64}$/);
    expect(JSON.stringify(entries)).not.toMatch(/secretcode|merino|silk/i);
    const answers = await service.database.sql<{ body: string }[]>`
      select body from idempotency_answers`;
    expect(JSON.stringify(answers)).not.toMatch(/secretcode/i);
  });
});

describe('participants', () => {
  it('are listed in pages, a coordinator those of the own site and without sequences', async () => {
    const path = `/v1/studies/${studyId}/participants`;
    const all: { siteId: string; id: string; sequence: string[] | null }[] = [];
    let query = '?limit=3';
    for (let pages = 0; pages < 50 && query !== ''; pages += 1) {
      const page = await places.lead.get(`${path}${query}`);
      all.push(...page.body.items);
      query = page.body.nextCursor === null ? '' : `?limit=3&cursor=${page.body.nextCursor}`;
    }
    expect(new Set(all.map(({ id }) => id)).size).toBe(all.length);
    const rows = await service.database.sql`
      select id from participants where study_id = ${studyId}`;
    expect(all).toHaveLength(rows.length);
    for (const { sequence } of all) expect(sequence).toHaveLength(4);
    const own = await places.harbour.coordinator.get(`${path}?limit=500`);
    const expected = all.filter(({ siteId }) => siteId === places.harbour.id);
    expect(own.body.items).toEqual(expected.map((one) => ({ ...one, sequence: null })));
    const [first] = expected;
    const byId = await places.harbour.coordinator.get(`${path}/${first?.id}`);
    expect(byId.body).toEqual({ ...first, sequence: null });
    expect(problemOf(await places.otherLead.get(path))).toEqual([404, 'not-found']);
  });

  it('are erased to a tombstone that no kept answer gives away', async () => {
    const [station] = places.ridge.stations;
    const arrival = { code: 'FORGET-ME', key: 'forget-me' };
    const { id } = (await arriveNew(station, studyId, arrival)).body.participant;
    await service.database.inSqlTransaction((tx) => eraseParticipantRecords(tx, id, new Date()));
    expect(problemOf(await returning(station, 'FORGET-ME'))).toEqual([404, 'participant-unknown']);
    const path = `/v1/studies/${studyId}/participants/${id}`;
    expect(problemOf(await places.lead.get(path))).toEqual([410, 'participant-erased']);
    const repeat = await arriveNew(station, studyId, arrival);
    expect(problemOf(repeat)).toEqual([409, 'idempotency-key-reused']);
    const kept = await service.database.sql`
      select body, request_hash from idempotency_answers where participant_id = ${id}`;
    expect(kept.map((row) => [row.body, row.request_hash])).toEqual([['', '']]);
    const list = await places.lead.get(`/v1/studies/${studyId}/participants?limit=500`);
    const tombstone = list.body.items.find((item: { id: string }) => item.id === id);
    expect(tombstone).toMatchObject({ code: null });
    expect(tombstone.erasedAt).not.toBeNull();
  });
});
