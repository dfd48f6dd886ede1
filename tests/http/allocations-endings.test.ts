import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import {
  findParticipants,
  markPeriodsBegun,
  participantRecords,
} from '#server/allocations/service.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
  amend,
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  openStudy,
} from '../support/cold-store.ts';

const DAY = 86_400_000;

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
const station = () => places.harbour.stations[0];
const pathOf = (study: string, code: string, rest = '') =>
  `/v1/studies/${study}/participants/${code}${rest}`;

const sequenceOf = (answer: { body: { periods: { condition: { key: string } }[] } }) =>
  answer.body.periods.map(({ condition }) => condition.key).join();

function withdraw(study: string, code: string, more: Record<string, unknown> = {}, key?: string) {
  return station().post(
    pathOf(study, code, '/withdrawal'),
    { reasonCode: 'unwell', periodReached: 0, ...more },
    key === undefined ? {} : { 'idempotency-key': key },
  );
}

function voidCheckIn(study: string, code: string, key?: string) {
  return places.harbour.coordinator.post(
    pathOf(study, code, '/void'),
    { reason: 'Checked in at the wrong study.' },
    key === undefined ? {} : { 'idempotency-key': key },
  );
}

describe('a withdrawal', () => {
  it('is recorded with reason and period, its note as a commitment', async () => {
    await arriveNew(station(), studyId, { code: 'W1' });
    await station().post(pathOf(studyId, 'W1', '/period-starts'), { period: 1 });
    const key = randomUUID();
    const body = { periodReached: 1, note: 'Fainted in the cold room.' };
    const answer = await withdraw(studyId, 'W1', body, key);
    expect(answer.status).toBe(200);
    expect(answer.body).toMatchObject({
      code: 'W1',
      ending: { kind: 'withdrawn', reasonCode: 'unwell', periodReached: 1 },
    });
    expect((await withdraw(studyId, 'W1', body, key)).body).toEqual(answer.body);
    const log = await places.lead.get(`/v1/audit/chains/${studyId}/entries?limit=500`);
    expect(log.text).toContain('participant-withdrawn');
    expect(log.text).not.toContain('Fainted');
    for (const refused of [
      await withdraw(studyId, 'W1'),
      await station().get(pathOf(studyId, 'W1', '/due')),
      await station().post(pathOf(studyId, 'W1', '/period-starts'), { period: 2 }),
      await station().post(`/v1/studies/${studyId}/arrivals`, { kind: 'returning', code: 'W1' }),
      await voidCheckIn(studyId, 'W1'),
    ]) {
      expect(problemOf(refused)).toEqual([409, 'participant-ended']);
    }
  });

  it('refuses an unknown reason and a period that was not the last', async () => {
    await arriveNew(station(), studyId, { code: 'W2' });
    await station().post(pathOf(studyId, 'W2', '/period-starts'), { period: 1 });
    for (const [body, pointer] of [
      [{ reasonCode: 'bored', periodReached: 1 }, '/reasonCode'],
      [{ periodReached: 0 }, '/periodReached'],
      [{ periodReached: 5 }, '/periodReached'],
      [{ periodReached: 1.5 }, '/periodReached'],
      [{ periodReached: 1, withdrawnAt: new Date(Date.now() + DAY).toISOString() }, '/withdrawnAt'],
    ] as const) {
      const refused = await withdraw(studyId, 'W2', body);
      expect(problemOf(refused)).toEqual([400, 'invalid-request']);
      expect(refused.body.faults[0].pointer).toBe(pointer);
    }
    const lead = await places.lead.post(pathOf(studyId, 'W2', '/withdrawal'), {
      reasonCode: 'own-wish',
      periodReached: 2,
    });
    expect(lead.status).toBe(200);
  });

  it('keeps a start that happened before it and is reported after it', async () => {
    const { id } = (await arriveNew(station(), studyId, { code: 'W3' })).body.participant;
    const arrived = new Date(Date.now() - DAY);
    await service.database.sql`update participants set arrived_at = ${arrived} where id = ${id}`;
    await withdraw(studyId, 'W3', { periodReached: 1 });
    const startedAt = new Date(Date.now() - 3_600_000).toISOString();
    const path = pathOf(studyId, 'W3', '/period-starts');
    expect((await station().post(path, { period: 1, startedAt })).status).toBe(201);
    expect(problemOf(await station().post(path, { period: 2 }))).toEqual([
      409,
      'participant-ended',
    ]);
  });
});

describe('a vacated slot', () => {
  it('goes to the next arrival of its site and stratum, lowest number first', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 4));
    const first = await arriveNew(station(), own, { code: 'A1' });
    const second = await arriveNew(station(), own, { code: 'A2' });
    await withdraw(own, 'A2');
    await withdraw(own, 'A1');
    // Another stratum and another site get slots of their own.
    const late = await arriveNew(station(), own, { code: 'L1', stratum: { shift: 'late' } });
    expect(late.body).toMatchObject({ slotNumber: 3, replacement: false });
    const fen = await arriveNew(places.fen.stations[0], own, { code: 'F1' });
    expect(fen.body).toMatchObject({ slotNumber: 1, replacement: false });
    const third = await arriveNew(station(), own, { code: 'A3' });
    expect(third.body).toMatchObject({ slotNumber: 1, replacement: true });
    expect(sequenceOf(third)).toBe(sequenceOf(first));
    const fourth = await arriveNew(station(), own, { code: 'A4' });
    expect(fourth.body).toMatchObject({ slotNumber: 2, replacement: true });
    expect(sequenceOf(fourth)).toBe(sequenceOf(second));
    const fifth = await arriveNew(station(), own, { code: 'A5' });
    expect(fifth.body).toMatchObject({ slotNumber: 4, replacement: false });
    expect(problemOf(await arriveNew(station(), own))).toEqual([409, 'site-full']);
    // Full, and yet a vacated slot can be taken over.
    await withdraw(own, 'A3');
    const sixth = await arriveNew(station(), own, { code: 'A6' });
    expect(sixth.body).toMatchObject({ slotNumber: 1, replacement: true });
    const issued = await places.lead.get(`/v1/studies/${own}/balance`);
    const harbour = issued.body.sites.find(
      ({ siteId }: { siteId: string }) => siteId === places.harbour.id,
    );
    expect(harbour.slotsIssued).toBe(4);
    await places.lead.post(`/v1/studies/${own}/closure`, {});
    const replay = await places.auditor.post(`/v1/studies/${own}/replays`);
    expect(replay.body).toMatchObject({ agrees: true, verified: 5 });
  });

  it('is given to nobody when the protocol does not replace', async () => {
    const protocol = coldStoreProtocol(places, 2);
    protocol.replacement = { kind: 'none' };
    const own = await openStudy(places.lead, protocol);
    await arriveNew(station(), own, { code: 'A1' });
    await withdraw(own, 'A1');
    const second = await arriveNew(station(), own, { code: 'A2' });
    expect(second.body).toMatchObject({ slotNumber: 2, replacement: false });
    expect(problemOf(await arriveNew(station(), own))).toEqual([409, 'site-full']);
  });

  it('taken over by many at once is taken over by one', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 60));
    for (const code of ['A1', 'A2', 'A3']) await arriveNew(station(), own, { code });
    await withdraw(own, 'A2');
    const answers = await Promise.all(Array.from({ length: 6 }, () => arriveNew(station(), own)));
    const numbers = answers.map(({ body }) => body.slotNumber).sort();
    expect(numbers).toEqual([2, 4, 5, 6, 7, 8]);
    expect(answers.filter(({ body }) => body.replacement)).toHaveLength(1);
  });
});

describe('a voided check-in', () => {
  it('frees its code and its slot, which is offered before any other', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 10));
    const arrivals = { code: 'A2', key: randomUUID() };
    await arriveNew(station(), own, { code: 'A1' });
    const mistaken = await arriveNew(station(), own, arrivals);
    await withdraw(own, 'A1');
    const key = randomUUID();
    const voided = await voidCheckIn(own, 'A2', key);
    expect(voided.status).toBe(200);
    expect(voided.body).toMatchObject({ code: null, ending: { kind: 'void' }, slotNumber: 2 });
    expect((await voidCheckIn(own, 'A2', key)).body).toEqual(voided.body);
    const repeat = await arriveNew(station(), own, arrivals);
    expect(problemOf(repeat)).toEqual([409, 'participant-ended']);
    expect(problemOf(await station().get(pathOf(own, 'A2', '/due')))).toEqual([
      404,
      'participant-unknown',
    ]);
    const right = await arriveNew(station(), own, { code: 'a2' });
    expect(right.body).toMatchObject({ slotNumber: 2, replacement: false });
    expect(right.body.participant.id).not.toBe(mistaken.body.participant.id);
    expect(sequenceOf(right)).toBe(sequenceOf(mistaken));
    const next = await arriveNew(station(), own);
    expect(next.body).toMatchObject({ slotNumber: 1, replacement: true });
  });

  it('is offered again even when the protocol does not replace', async () => {
    const protocol = coldStoreProtocol(places, 1);
    protocol.replacement = { kind: 'none' };
    const own = await openStudy(places.lead, protocol);
    await arriveNew(station(), own, { code: 'A1' });
    await voidCheckIn(own, 'A1');
    const again = await arriveNew(station(), own, { code: 'A1' });
    expect(again.body).toMatchObject({ slotNumber: 1, replacement: false });
  });

  it('of one who had taken over a slot leaves the replacement to the next', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 10));
    await arriveNew(station(), own, { code: 'A1' });
    await withdraw(own, 'A1');
    expect((await arriveNew(station(), own, { code: 'A2' })).body.replacement).toBe(true);
    await voidCheckIn(own, 'A2');
    const third = await arriveNew(station(), own, { code: 'A3' });
    expect(third.body).toMatchObject({ slotNumber: 1, replacement: true });
  });

  it('is refused once a period was started or a trial has come in, and to stations', async () => {
    await arriveNew(station(), studyId, { code: 'V1' });
    await station().post(pathOf(studyId, 'V1', '/period-starts'), { period: 1 });
    expect(problemOf(await voidCheckIn(studyId, 'V1'))).toEqual([409, 'has-data']);
    const { id } = (await arriveNew(station(), studyId, { code: 'V2' })).body.participant;
    const begun = [{ participantId: id, period: 1 }];
    await service.database.inSqlTransaction((tx) => markPeriodsBegun(tx, begun));
    expect(problemOf(await voidCheckIn(studyId, 'V2'))).toEqual([409, 'has-data']);
    await arriveNew(station(), studyId, { code: 'V3' });
    const body = { reason: 'A slip.' };
    const refused = await station().post(pathOf(studyId, 'V3', '/void'), body);
    expect(problemOf(refused)).toEqual([403, 'not-permitted']);
    const unexplained = await places.lead.post(pathOf(studyId, 'V3', '/void'), { reason: ' ' });
    expect(problemOf(unexplained)).toEqual([400, 'invalid-request']);
  });
});

describe('an amendment', () => {
  it('leaves who was allocated as they are, and balances anew within its own version', async () => {
    const protocol = coldStoreProtocol(places, 6);
    const own = await openStudy(places.lead, protocol);
    const first = await arriveNew(station(), own, { code: 'A1' });
    await arriveNew(station(), own, { code: 'A2' });
    await withdraw(own, 'A2');
    const next = coldStoreProtocol(places, 6);
    next.scheme = { kind: 'cyclic-latin-square' };
    next.periods.washout.minimum = 'PT1H';
    next.sites = next.sites.filter(({ siteId }) => siteId !== places.ridge.id);
    await amend(places.lead, own, next);

    const again = await station().post(`/v1/studies/${own}/arrivals`, {
      kind: 'returning',
      code: 'A1',
    });
    expect(again.body).toEqual(first.body);
    const due = await station().get(pathOf(own, 'A1', '/due'));
    expect(due.body.washout.minimum).toBe('PT20M');

    // Nobody new is run under the old protocol: its vacated slot lapses and does not fill the site.
    const sequences: string[] = [];
    for (const number of [3, 4, 5, 6, 7]) {
      const answer = await arriveNew(station(), own);
      expect(answer.body).toMatchObject({ slotNumber: number, protocolVersion: 2 });
      expect(answer.body.washout.minimum).toBe('PT1H');
      sequences.push(sequenceOf(answer));
    }
    expect(new Set(sequences.slice(0, 4)).size).toBe(4);
    expect(problemOf(await arriveNew(station(), own))).toEqual([409, 'site-full']);
    const ridge = await arriveNew(places.ridge.stations[0], own);
    expect(problemOf(ridge)).toEqual([409, 'site-not-in-study']);

    const balance = (version: number) =>
      places.lead.get(`/v1/studies/${own}/balance?protocolVersion=${version}`);
    const total = (body: { sites: { planned: number[] }[] }) =>
      body.sites.flatMap(({ planned }) => planned).reduce((sum, count) => sum + count, 0);
    expect(total((await balance(1)).body)).toBe(2);
    expect(total((await balance(2)).body)).toBe(5);
    await places.lead.post(`/v1/studies/${own}/closure`, {});
    const replay = await places.auditor.post(`/v1/studies/${own}/replays`);
    expect(replay.body).toMatchObject({ agrees: true, verified: 7 });
  });
});

describe('what the features above read', () => {
  it('holds everybody who ever had a slot, with sequence, ending and periods', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 10));
    const first = await arriveNew(station(), own, { code: 'A1' });
    await station().post(pathOf(own, 'A1', '/period-starts'), { period: 1 });
    await withdraw(own, 'A1', { periodReached: 1 });
    await arriveNew(station(), own, { code: 'A2' });
    await arriveNew(station(), own, { code: 'A3' });
    await voidCheckIn(own, 'A3');
    const { database } = service;
    const records = await database.inSqlTransaction((tx) => participantRecords(tx, own));
    expect(records).toMatchObject([
      {
        id: first.body.participant.id,
        siteId: places.harbour.id,
        slotNumber: 1,
        replacement: false,
        ending: { kind: 'withdrawn', reasonCode: 'unwell', periodReached: 1 },
        periods: [{ period: 1, deviations: [], completedAt: null }],
      },
      { slotNumber: 1, replacement: true, ending: null, periods: [] },
      { slotNumber: 2, replacement: false, ending: { kind: 'void' } },
    ]);
    expect(records[0]?.sequence.join()).toBe(sequenceOf(first));
    const known = await database.inSqlTransaction((tx) =>
      findParticipants(tx, own, ['a1', 'A1', 'A2', 'A3', 'nobody']),
    );
    expect([...known.keys()].sort()).toEqual(['A1', 'A2']);
    expect(known.get('A1')).toMatchObject({ code: 'A1', sequence: records[0]?.sequence });
    expect(known.get('A1')?.withdrawnAt).toBeInstanceOf(Date);
    expect(known.get('A2')?.withdrawnAt).toBeNull();
  });
});
