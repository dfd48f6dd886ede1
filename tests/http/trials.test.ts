import { createHash, randomUUID } from 'node:crypto';
import { once } from 'node:events';
import { readdirSync } from 'node:fs';
import { connect } from 'node:net';
import { tmpdir } from 'node:os';
import { setTimeout as pause } from 'node:timers/promises';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { startTestService, type TestService } from '../support/app.ts';
import {
  amend,
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  openStudy,
} from '../support/cold-store.ts';
import {
  allRowsOf,
  faultsOf,
  type Person,
  personOf,
  type Row,
  rowOf,
  upload,
} from '../support/trial-rows.ts';

let service: TestService;
let places: ColdStore;
let studyId: string;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
  studyId = await openStudy(places.lead, coldStoreProtocol(places, 60));
});

afterAll(() => service.close());

const station = () => places.harbour.stations[0];
const uploads = () => `/v1/studies/${studyId}/uploads`;
const arrive = async (): Promise<Person> => personOf(await arriveNew(station(), studyId));

const storedOf = async (person: Person) => service.database.sql<
  { period: number; repetition: number; flags: string[]; deviation: boolean; commitment: string }[]
>`select period, repetition, flags, deviation, commitment from trials
  where participant_id = ${person.id} and current order by period, repetition`;

const lastEntry = async () => {
  const rows = await service.database.sql<{ content: string }[]>`
    select content from audit_entries where chain = ${studyId} order by number desc limit 1`;
  return JSON.parse(rows[0]?.content ?? '{}');
};

describe('an upload without faults', () => {
  it('is stored, counted, logged by commitments, and completes the periods', async () => {
    const person = await arrive();
    const answer = await upload(station(), studyId, allRowsOf(person));
    expect(answer.status, answer.text).toBe(201);
    expect(answer.body).toMatchObject({
      siteId: places.harbour.id,
      operator: 'op-1',
      acceptance: 'all-or-nothing',
      mediaType: 'application/json',
      outcome: 'stored',
      rows: 12,
      accepted: 12,
      repeated: 0,
      refused: 0,
      flagged: 0,
      deviations: 0,
      faults: [],
    });
    const shown = await places.lead.get(`/v1/studies/${studyId}/participants/${person.code}`);
    expect(shown.body.periods.map((one: { completedAt: unknown }) => one.completedAt)).toEqual(
      Array(4).fill(answer.body.receivedAt),
    );

    const entry = await lastEntry();
    const commitments = await service.database.sql<{ commitment: string }[]>`
      select commitment from trials where upload_id = ${answer.body.id} order by id`;
    const hash = createHash('sha256');
    for (const { commitment } of commitments) hash.update(`${commitment}\n`);
    expect(entry).toMatchObject({
      action: 'trials-uploaded',
      subject: answer.body.id,
      actor: { role: 'station', operator: 'op-1' },
      details: { rows: 12, accepted: 12, commitmentsSha256: hash.digest('hex') },
    });
    expect(JSON.stringify(entry)).not.toContain(person.code);
  });

  // published: RFC 4180 and its media type, RFC 8259; NDJSON by common practice.
  it('may be CSV, NDJSON or JSON, and says the same in each', async () => {
    const person = await arrive();
    const rows = [rowOf(person, 1, 1), rowOf(person, 1, 2), rowOf(person, 1, 3)];
    const measures = ['pegboard-time', 'pegs-dropped', 'part-misseated', 'hand-comfort'];
    const columns = ['participant', 'period', 'repetition', 'condition', 'recordId', 'startedAt'];
    const header = [...columns, ...measures, 'missing.hand-comfort', 'note'].join(',');
    const csv = rows.map((row) =>
      [
        ...columns.map((column) => row[column]),
        ...measures.map((measure) => row.values[measure] ?? ''),
        '',
        row.repetition === 3 ? '"He said ""fine"",\r\nthen left"' : '',
      ].join(','),
    );
    const body = `\uFEFF${[header, ...csv].join('\r\n')}\r\n`;
    const first = await station().post(uploads(), body, { 'content-type': 'text/csv' });
    expect(first.status, first.text).toBe(201);
    expect(first.body).toMatchObject({ rows: 3, accepted: 3 });

    const same = rows.map((row) =>
      row.repetition === 3 ? { ...row, note: 'He said "fine",\r\nthen left' } : row,
    );
    const lines = same.map((row) => `${JSON.stringify(row)}\n`).join('');
    const ndjson = await station().post(uploads(), lines, {
      'content-type': 'application/x-ndjson; charset=utf-8',
    });
    expect(ndjson.body).toMatchObject({ rows: 3, accepted: 0, repeated: 3, refused: 0 });
    const json = await upload(station(), studyId, same);
    expect(json.body).toMatchObject({ rows: 3, accepted: 0, repeated: 3, refused: 0 });
  });

  it('keeps what is implausible, flagged, and counts it', async () => {
    const person = await arrive();
    const slow = rowOf(person, 1, 2);
    slow.values['pegboard-time'] = 400;
    slow.values['pegs-dropped'] = 26;
    const answer = await upload(station(), studyId, [rowOf(person, 1, 1), slow]);
    expect(answer.body).toMatchObject({ accepted: 2, flagged: 1 });
    expect((await storedOf(person)).map(({ flags }) => flags)).toEqual([
      [],
      ['out-of-range:pegboard-time', 'out-of-range:pegs-dropped'],
    ]);
  });

  it('keeps another condition than the assigned one as a deviation', async () => {
    const person = await arrive();
    const swapped = rowOf(person, 1, 1, { condition: person.conditions[1] ?? '' });
    const answer = await upload(station(), studyId, [swapped, rowOf(person, 1, 2)]);
    expect(answer.body).toMatchObject({ accepted: 2, deviations: 1, refused: 0 });
    expect((await storedOf(person)).map(({ deviation }) => deviation)).toEqual([true, false]);
  });

  it('of no rows is one of no rows', async () => {
    const answer = await upload(station(), studyId, []);
    expect(answer.body).toMatchObject({ rows: 0, accepted: 0, outcome: 'stored' });
  });
});

describe('an upload with faults', () => {
  it('stores nothing, and keeps the refused rows as they came', async () => {
    const person = await arrive();
    const bad = rowOf(person, 1, 2, { period: 9 });
    const answer = await upload(station(), studyId, [rowOf(person, 1, 1), bad, 'oops']);
    expect(answer.status).toBe(422);
    expect(answer.body.type).toBe('/problems/upload-refused');
    expect(faultsOf(answer)).toEqual(['2 /period period-outside-sequence', '3  not-an-object']);
    expect(await storedOf(person)).toEqual([]);

    const upload1 = await station().get(answer.headers.location ?? '');
    expect(upload1.body).toMatchObject({ outcome: 'refused', rows: 3, accepted: 0, refused: 2 });
    expect(await lastEntry()).toMatchObject({ action: 'upload-refused', details: { refused: 2 } });
    const kept = await station().get(`${answer.headers.location}/refused-rows`);
    const raws = kept.body.items.map(({ row, raw }: { row: number; raw: string }) => [row, raw]);
    expect(raws).toEqual([
      [2, JSON.stringify(bad)],
      [3, '"oops"'],
    ]);
    const page = await station().get(`${answer.headers.location}/refused-rows?limit=1`);
    expect(page.body.items).toHaveLength(1);
    const rest = `${answer.headers.location}/refused-rows?cursor=${page.body.nextCursor}`;
    expect((await station().get(rest)).body.items).toMatchObject([{ row: 3 }]);
  });

  it('stores the valid rows when asked, and lists the others', async () => {
    const person = await arrive();
    const lines = [
      JSON.stringify(rowOf(person, 1, 1)),
      '{"participant": ',
      JSON.stringify({ ...rowOf(person, 1, 2), speed: 3 }),
      JSON.stringify(rowOf(person, 1, 3)),
    ];
    const path = `${uploads()}?acceptance=valid-rows`;
    const type = { 'content-type': 'application/x-ndjson' };
    const answer = await station().post(path, lines.join('\n'), type);
    expect(answer.status).toBe(201);
    expect(answer.body).toMatchObject({ outcome: 'stored', rows: 4, accepted: 2, refused: 2 });
    expect(faultsOf(answer)).toEqual(['2  malformed-json', '3 /speed unknown-field']);
    expect((await storedOf(person)).map(({ repetition }) => repetition)).toEqual([1, 3]);
  });

  it('names a participant who is unknown, voided or of another site in the same way', async () => {
    const elsewhere = personOf(await arriveNew(places.fen.stations[0], studyId));
    const voided = await arrive();
    await places.harbour.coordinator.post(
      `/v1/studies/${studyId}/participants/${voided.code}/void`,
      { reason: 'Typed twice.' },
    );
    const known = await arrive();
    const nobody = { ...known, code: 'NOBODY' };
    const answer = await upload(
      station(),
      studyId,
      [elsewhere, voided, nobody].map((person) => rowOf(person, 1, 1)),
    );
    expect(answer.status).toBe(422);
    expect(faultsOf(answer)).toEqual([
      '1 /participant participant-unknown',
      '2 /participant participant-unknown',
      '3 /participant participant-unknown',
    ]);
    expect(
      new Set(answer.body.faults.map((fault: { message: string }) => fault.message)).size,
    ).toBe(1);
    expect(await storedOf(elsewhere)).toEqual([]);
  });

  it('never repeats in an answer what stood in a row', async () => {
    const person = await arrive();
    const secret = rowOf(person, 1, 1, { condition: 'secret-word', note: 'x'.repeat(3000) });
    secret.values['pegs-dropped'] = 77.125;
    const answer = await upload(station(), studyId, [secret]);
    expect(answer.status).toBe(422);
    for (const word of ['secret-word', '77.125', person.code, 'xxxx']) {
      expect(answer.text).not.toContain(word);
    }
  });

  it('that cannot be read as rows is refused whole, and nothing is kept', async () => {
    const count = async () => (await places.lead.get(uploads())).body.items.length;
    const before = await count();
    const post = (body: string, type: string) =>
      station().post(uploads(), body, { 'content-type': type });
    expect((await post('{"a": 1}', 'application/json')).status).toBe(400);
    const unended = await post('[{"a": 1}, {"b": "', 'application/json');
    expect(unended.body.faults).toMatchObject([{ row: 2, code: 'array-not-ended' }]);
    const columns = await post('participant;period\nP1;1\n', 'text/csv');
    expect(columns.body.faults[0]).toMatchObject({ pointer: '/header/0', code: 'unknown-column' });
    expect((await post('a', 'text/plain')).status).toBe(415);
    expect((await post('[]', 'application/json; charset=utf-16')).status).toBe(415);
    expect((await post('a,b', 'text/csv; header=absent')).status).toBe(415);
    const zipped = { 'content-type': 'text/csv', 'content-encoding': 'gzip' };
    expect((await station().post(uploads(), 'a', zipped)).status).toBe(415);
    expect((await station().post(uploads())).status).toBeGreaterThanOrEqual(400);
    expect(await count()).toBe(before);
  });
});

describe('an upload that breaks off', () => {
  it('leaves nothing, neither stored nor on disk, and the service goes on', async () => {
    const person = await arrive();
    const url = new URL(await service.startInstance());
    const spools = () =>
      readdirSync(tmpdir()).filter((name) => name.startsWith('fairturn-upload-'));
    const rows = `${JSON.stringify(rowOf(person, 1, 1))}\n`;
    const socket = connect(Number(url.port), url.hostname);
    await once(socket, 'connect');
    socket.write(
      `POST ${uploads()} HTTP/1.1\r\nhost: ${url.host}\r\noperator-code: op-1\r\n` +
        `authorization: Bearer ${places.harbour.stationTokens[0]}\r\n` +
        `content-type: application/x-ndjson\r\ncontent-length: 100000\r\n\r\n${rows}`,
    );
    await pause(200);
    expect(spools()).toEqual([]);
    socket.destroy();
    await pause(200);
    expect(await storedOf(person)).toEqual([]);
    const whole = await upload(station(), studyId, [rowOf(person, 1, 1)]);
    expect(whole.body).toMatchObject({ accepted: 1 });
  });
});

describe('a record that is there already', () => {
  it('is accepted as such when it is the same, in one upload or the next', async () => {
    const person = await arrive();
    const row = rowOf(person, 2, 1);
    const first = await upload(station(), studyId, [row, row]);
    expect(first.body).toMatchObject({ rows: 2, accepted: 1, repeated: 1, refused: 0 });
    // Another order of fields, another station of the site.
    const turned = Object.fromEntries(Object.entries(row).reverse());
    const second = await upload(places.harbour.stations[1], studyId, [turned]);
    expect(second.body).toMatchObject({ rows: 1, accepted: 0, repeated: 1, refused: 0 });
    expect(await storedOf(person)).toHaveLength(1);
  });

  it('is refused with other values, row by row and field by field', async () => {
    const person = await arrive();
    await upload(station(), studyId, [rowOf(person, 1, 1), rowOf(person, 1, 2)]);
    const before = await storedOf(person);
    const changed = rowOf(person, 1, 1, { startedAt: '2026-03-02T11:00:00Z', note: 'Late.' });
    changed.values['hand-comfort'] = 5;
    const rows = [rowOf(person, 1, 2), changed, rowOf(person, 1, 3)];
    const answer = await upload(station(), studyId, rows, { acceptance: 'valid-rows' });
    expect(answer.body).toMatchObject({ accepted: 1, repeated: 1, refused: 1 });
    expect(faultsOf(answer)).toEqual([
      '2 /startedAt differs-from-stored',
      '2 /note differs-from-stored',
      '2 /values/hand-comfort differs-from-stored',
    ]);
    expect((await storedOf(person)).slice(0, 2)).toEqual(before);
  });

  it('conflicts within one upload too, and a record id is that of one record', async () => {
    const person = await arrive();
    const other = rowOf(person, 1, 1, { note: 'Another.' });
    const taken = rowOf(person, 1, 2, { recordId: rowOf(person, 1, 1).recordId });
    const rows = [rowOf(person, 1, 1), other, taken];
    const answer = await upload(station(), studyId, rows, { acceptance: 'valid-rows' });
    expect(answer.body).toMatchObject({ accepted: 1, refused: 2 });
    expect(faultsOf(answer)).toEqual([
      '2 /note differs-from-stored',
      '3 /recordId record-id-taken',
    ]);
    const later = await upload(station(), studyId, [taken]);
    expect(faultsOf(later)).toEqual(['1 /recordId record-id-taken']);
  });

  it('is stored once when two uploads bring it at once', async () => {
    const people = await Promise.all([arrive(), arrive(), arrive()]);
    const rows = people.flatMap(allRowsOf);
    const answers = await Promise.all(
      Array.from({ length: 6 }, (_, index) =>
        upload(places.harbour.stations[index % 2 === 0 ? 0 : 1], studyId, rows),
      ),
    );
    expect(answers.map(({ status }) => status)).toEqual(Array(6).fill(201));
    const accepted = answers.map(({ body }) => body.accepted).sort((a, b) => a - b);
    expect(accepted).toEqual([0, 0, 0, 0, 0, 36]);
    for (const person of people) expect(await storedOf(person)).toHaveLength(12);
  });
});

describe('an Idempotency-Key', () => {
  it('gives the first answer again for the same bytes, also when they were refused', async () => {
    const person = await arrive();
    const key = randomUUID();
    const rows = [rowOf(person, 1, 1)];
    const first = await upload(station(), studyId, rows, { key });
    const again = await upload(station(), studyId, rows, { key });
    expect(again.body).toEqual(first.body);
    expect(again.body).toMatchObject({ accepted: 1, repeated: 0 });
    const refusedKey = randomUUID();
    const stray = [rowOf(person, 7, 1)];
    const refused = await upload(station(), studyId, stray, { key: refusedKey });
    const refusedAgain = await upload(station(), studyId, stray, { key: refusedKey });
    expect(refusedAgain.status).toBe(422);
    expect(refusedAgain.body.faults).toEqual(refused.body.faults);
    expect(refusedAgain.headers.location).toBe(refused.headers.location);
  });

  it('is refused with other bytes or another acceptance', async () => {
    const person = await arrive();
    const key = randomUUID();
    await upload(station(), studyId, [rowOf(person, 1, 1)], { key });
    const other = await upload(station(), studyId, [rowOf(person, 1, 2)], { key });
    expect(other.body.type).toBe('/problems/idempotency-key-reused');
    const valid = { key, acceptance: 'valid-rows' as const };
    const same = await upload(station(), studyId, [rowOf(person, 1, 1)], valid);
    expect(same.body.type).toBe('/problems/idempotency-key-reused');
    expect(await storedOf(person)).toHaveLength(1);
  });

  it('keeps neither a code nor a hash of the bytes with the answer', async () => {
    const person = await arrive();
    const key = randomUUID();
    const rows = [rowOf(person, 1, 1)];
    await upload(station(), studyId, rows, { key });
    const [kept] = await service.database.sql<{ request_hash: string; body: string }[]>`
      select request_hash, body from idempotency_answers where key = ${key}`;
    const bytes = createHash('sha256').update(JSON.stringify(rows)).digest('hex');
    expect(kept?.body).not.toContain(bytes);
    expect(kept?.body).not.toContain(person.code);
  });
});

describe('participants who stop', () => {
  it('may have late uploads; what was not reached is kept and flagged', async () => {
    const person = await arrive();
    const left = await station().post(
      `/v1/studies/${studyId}/participants/${person.code}/withdrawal`,
      { reasonCode: 'own-wish', periodReached: 1 },
    );
    expect(left.status, left.text).toBe(200);
    const rows = [rowOf(person, 1, 1), rowOf(person, 2, 1)];
    const answer = await upload(station(), studyId, rows);
    expect(answer.body).toMatchObject({ accepted: 2, flagged: 1 });
    expect((await storedOf(person)).map(({ flags }) => flags)).toEqual([
      [],
      ['period-not-reached'],
    ]);
  });

  it('cannot be voided once a trial is there', async () => {
    const person = await arrive();
    await upload(station(), studyId, [rowOf(person, 1, 1)]);
    const voided = await places.harbour.coordinator.post(
      `/v1/studies/${studyId}/participants/${person.code}/void`,
      { reason: 'Typed twice.' },
    );
    expect(voided.body.type).toBe('/problems/has-data');
  });
});

describe('the protocol version of a participant', () => {
  it('decides on the row, whatever version is in force', async () => {
    const protocol = coldStoreProtocol(places, 20);
    const own = await openStudy(places.lead, protocol);
    const early = personOf(await arriveNew(station(), own));
    const amended = structuredClone(protocol);
    amended.periods.repetitions = 2;
    await amend(places.lead, own, amended);
    const late = personOf(await arriveNew(station(), own));
    const rows: Row[] = [rowOf(early, 1, 3), rowOf(late, 1, 3)];
    const answer = await upload(station(), own, rows, { acceptance: 'valid-rows' });
    expect(answer.body).toMatchObject({ accepted: 1, refused: 1 });
    expect(faultsOf(answer)).toEqual(['2 /repetition repetition-not-planned']);
  });
});

describe('who sees an upload', () => {
  it('is its own site, the owning lab and nobody else', async () => {
    const person = await arrive();
    const { body } = await upload(station(), studyId, [rowOf(person, 1, 1)]);
    const path = `${uploads()}/${body.id}`;
    for (const caller of [station(), places.harbour.coordinator, places.lead, places.auditor]) {
      expect((await caller.get(path)).status).toBe(200);
    }
    const others = [places.ridge.stations[0], places.fen.coordinator, places.otherLead];
    for (const caller of others) expect((await caller.get(path)).status).toBe(404);
    expect((await places.auditor.get(`${path}/refused-rows`)).status).toBe(403);
    const listed = await places.fen.coordinator.get(uploads());
    expect(listed.body.items).toEqual([]);
    const mine = await places.harbour.coordinator.get(`${uploads()}?limit=2`);
    expect(mine.body.items).toHaveLength(2);
    expect(mine.body.nextCursor).not.toBeNull();
  });

  it('takes none for a study in which its site has no part, or by another role', async () => {
    const { fen, lead } = places;
    const protocol = coldStoreProtocol(places);
    const without = {
      ...protocol,
      sites: protocol.sites.filter(({ siteId }) => siteId !== fen.id),
    };
    const own = await openStudy(lead, without);
    expect((await upload(fen.stations[0], own, [])).status).toBe(404);
    expect((await upload(lead, own, [])).status).toBe(403);
  });
});
