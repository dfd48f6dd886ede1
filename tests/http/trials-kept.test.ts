import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { canonicalJson } from '#core/hashing/canonical-json.ts';
import { saltedCommitment } from '#core/hashing/digest.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
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
const path = (rest: string) => `/v1/studies/${studyId}/${rest}`;
const arrive = async (code?: string): Promise<Person> =>
  personOf(await arriveNew(station(), studyId, code === undefined ? {} : { code }));

async function stored(person: Person): Promise<Person> {
  const answer = await upload(station(), studyId, allRowsOf(person));
  if (answer.status !== 201) throw new Error(answer.text);
  return person;
}

const versionsOf = async (person: Person, period: number, repetition: number) =>
  service.database.sql<
    {
      version: number;
      current: boolean;
      flags: string[];
      commitment: string;
      salt: Buffer;
      content: string;
    }[]
  >`select t.version, t.current, t.flags, t.commitment, c.salt, c.content
    from trials t join trial_contents c on c.trial_id = t.id
    where t.participant_id = ${person.id} and t.period = ${period}
      and t.repetition = ${repetition} order by t.version`;

const entriesOf = async (action: string) => {
  const rows = await service.database.sql<{ content: string }[]>`
    select content from audit_entries where chain = ${studyId} order by number`;
  return rows.map(({ content }) => JSON.parse(content)).filter((one) => one.action === action);
};

const verified = async () => {
  const admin = service.as(service.administrator);
  const answer = await admin.post('/v1/audit/verifications', {});
  return answer.body;
};

describe('a correction', () => {
  const corrected = { 'pegboard-time': 61, 'pegs-dropped': 1, 'part-misseated': false };
  const body = (person: Person, changed: object = {}) => ({
    participant: person.code,
    period: 1,
    repetition: 2,
    values: corrected,
    reason: 'The stopwatch was read wrongly.',
    ...changed,
  });

  it('is a new version; the original stays, and the log holds commitments', async () => {
    const person = await stored(await arrive());
    const { coordinator } = places.harbour;
    const answer = await coordinator.post(path('trial-corrections'), body(person));
    expect(answer.status, answer.text).toBe(201);
    expect(answer.body).toMatchObject({
      participantId: person.id,
      version: 2,
      condition: person.conditions[0],
      deviation: false,
      flags: ['out-of-range:pegboard-time'],
    });
    const [first, second] = await versionsOf(person, 1, 2);
    expect(first).toMatchObject({ version: 1, current: false });
    expect(second).toMatchObject({ version: 2, current: true });
    expect(JSON.parse(first?.content ?? '')).toMatchObject({ values: { 'pegboard-time': 21.2 } });
    expect(JSON.parse(second?.content ?? '')).toMatchObject({
      values: corrected,
      recordId: `${person.id}-1-2`,
      startedAt: '2026-03-02T06:02:00+01:00',
    });
    const entry = (await entriesOf('trial-corrected')).at(-1);
    expect(entry).toMatchObject({
      subject: answer.body.id,
      actor: { role: 'site-coordinator' },
      details: {
        version: 2,
        previousCommitment: first?.commitment,
        commitment: second?.commitment,
      },
    });
    expect(canonicalJson(entry)).not.toContain('stopwatch');
  });

  it('passes the checks of an upload', async () => {
    const person = await stored(await arrive());
    const { coordinator } = places.harbour;
    const values = { ...corrected, 'pegs-dropped': 1.5, speed: 3 };
    const wrong = await coordinator.post(path('trial-corrections'), body(person, { values }));
    expect(wrong.status).toBe(400);
    expect(wrong.body.faults).toMatchObject([
      { pointer: '/values/pegs-dropped', code: 'not-of-the-scale' },
      { pointer: '/values/speed', code: 'unknown-measure' },
    ]);
    const mute = await coordinator.post(path('trial-corrections'), body(person, { reason: ' ' }));
    expect(mute.status).toBe(400);
    expect(await versionsOf(person, 1, 2)).toHaveLength(1);
  });

  it('needs a trial that is there, reads otherwise, and is within reach', async () => {
    const person = await arrive();
    const { coordinator } = places.harbour;
    const none = await coordinator.post(path('trial-corrections'), body(person));
    expect(none.body.type).toBe('/problems/correction-not-possible');
    await stored(person);
    const { values } = rowOf(person, 1, 2);
    const same = await coordinator.post(path('trial-corrections'), body(person, { values }));
    expect(same.body.type).toBe('/problems/correction-not-possible');
    const other = await places.ridge.coordinator.post(path('trial-corrections'), body(person));
    expect(other.body.type).toBe('/problems/participant-unknown');
    const denied = await station().post(path('trial-corrections'), body(person));
    expect(denied.status).toBe(403);
  });

  it('leaves the original upload one that is there already', async () => {
    const person = await stored(await arrive());
    await places.lead.post(path('trial-corrections'), body(person));
    const again = await upload(station(), studyId, allRowsOf(person));
    expect(again.body).toMatchObject({ accepted: 0, repeated: 12, refused: 0 });
    const changed = rowOf(person, 1, 2, { note: 'Third.' });
    const third = await upload(station(), studyId, [changed]);
    expect(faultsOf(third)).toEqual([
      '1 /note differs-from-stored',
      '1 /values/pegboard-time differs-from-stored',
    ]);
  });

  it('is made once for one Idempotency-Key', async () => {
    const person = await stored(await arrive());
    const key = { 'idempotency-key': randomUUID() };
    const first = await places.lead.post(path('trial-corrections'), body(person), key);
    const again = await places.lead.post(path('trial-corrections'), body(person), key);
    expect(again.body).toEqual(first.body);
    expect(await versionsOf(person, 1, 2)).toHaveLength(2);
  });
});

describe('a commitment', () => {
  // reference: the core's commitment, held to FIPS 180-4 and RFC 8785.
  it('is opened by salt and content, for every version', async () => {
    const rows = await service.database.sql<
      { commitment: string; salt: Buffer; content: string }[]
    >`select t.commitment, c.salt, c.content
      from trials t join trial_contents c on c.trial_id = t.id where t.study_id = ${studyId}`;
    expect(rows.length).toBeGreaterThan(40);
    for (const { commitment, salt, content } of rows) {
      expect(saltedCommitment(salt, JSON.parse(content))).toBe(commitment);
    }
  });
});

describe('erasing a participant', () => {
  /** Every column of every table that could hold one of these words. */
  async function tablesHolding(words: readonly string[]): Promise<string[]> {
    const { sql } = service.database;
    const tables = await sql<{ name: string }[]>`
      select tablename as name from pg_tables where schemaname = 'public'`;
    const found: string[] = [];
    for (const { name } of tables) {
      for (const word of words) {
        const [row] = await sql<{ count: number }[]>`
          select count(*)::int as count from ${sql(name)} t
          where t::text ilike ${`%${word}%`}`;
        if ((row?.count ?? 0) > 0) found.push(`${name}: ${word}`);
      }
    }
    return found;
  }

  it('leaves no code, value or note anywhere, and the log verifies', async () => {
    const marks = ['QUIETCODE7', '1234.5625', 'whispered'];
    // Refused before anybody had the code, and afterwards.
    const early = { id: 'x', code: 'quietcode7', conditions: ['silk', '', '', ''] };
    const unknown = rowOf(early, 1, 1);
    unknown.values['pegboard-time'] = 1234.5625;
    expect((await upload(station(), studyId, [unknown])).status).toBe(422);

    const person = await arrive('QuietCode7');
    const row = rowOf(person, 1, 2, { note: 'They whispered.' });
    row.values['pegboard-time'] = 1234.5625;
    const key = randomUUID();
    const first = await upload(station(), studyId, [row], { key });
    expect(first.body.accepted).toBe(1);
    const stray = rowOf(person, 9, 1, { note: 'They whispered.' });
    await upload(station(), studyId, [stray], { acceptance: 'valid-rows' });
    await places.lead.post(path('trial-corrections'), {
      participant: person.code,
      period: 1,
      repetition: 2,
      values: { ...row.values, 'pegs-dropped': 3 },
      reason: 'They whispered the count of QuietCode7.',
    });
    expect((await tablesHolding(marks)).length).toBeGreaterThan(6);

    const bystander = await stored(await arrive());
    const before = await versionsOf(bystander, 1, 1);
    const erased = await places.lead.post(path(`participants/${person.code}/erasure`), {
      reasonCode: 'participant-request',
    });
    expect(erased.status, erased.text).toBe(200);
    expect(erased.body.participantId).toBe(person.id);
    expect(await tablesHolding(marks)).toEqual([]);
    expect(await versionsOf(bystander, 1, 1)).toEqual(before);

    expect(await verified()).toMatchObject({ intact: true });
    expect((await entriesOf('participant-erased')).at(-1)).toMatchObject({
      subject: person.id,
      details: { reasonCode: 'participant-request' },
    });
    const tombstones = await service.database.sql<{ commitment: string; flags: string[] }[]>`
      select commitment, flags from trials where participant_id = ${person.id}`;
    expect(tombstones).toHaveLength(2);
    expect(tombstones.flatMap(({ flags }) => flags)).toEqual([]);

    const repeat = await upload(station(), studyId, [row], { key });
    expect(repeat.body.type).toBe('/problems/idempotency-key-reused');
  });

  it('is logged once, however often it is asked for', async () => {
    const person = await stored(await arrive());
    const body = { reasonCode: 'consent-withdrawn' };
    const first = await places.lead.post(path(`participants/${person.code}/erasure`), body);
    const count = (await entriesOf('participant-erased')).length;
    const byId = await places.lead.post(path(`participants/${person.id}/erasure`), body);
    expect(byId.body).toEqual(first.body);
    const byCode = await places.lead.post(path(`participants/${person.code}/erasure`), body);
    expect(byCode.status).toBe(404);
    expect(await entriesOf('participant-erased')).toHaveLength(count);
  });

  it('frees the code for somebody new, whose records are their own', async () => {
    const person = await stored(await arrive('Twice-1'));
    await places.lead.post(path('participants/twice-1/erasure'), { reasonCode: 'legal-duty' });
    const answer = await upload(station(), studyId, [rowOf(person, 1, 1)]);
    expect(faultsOf(answer)).toEqual(['1 /participant participant-unknown']);
    const next = await arrive('TWICE-1');
    expect(next.id).not.toBe(person.id);
    const own = await upload(station(), studyId, allRowsOf(next));
    expect(own.body).toMatchObject({ accepted: 12, repeated: 0 });
  });

  it('is for the study lead of the owning lab', async () => {
    const person = await arrive();
    const url = path(`participants/${person.code}/erasure`);
    const body = { reasonCode: 'legal-duty' };
    expect((await places.harbour.coordinator.post(url, body)).status).toBe(403);
    expect((await places.otherLead.post(url, body)).status).toBe(404);
    const free = { reasonCode: 'because she asked' };
    expect((await places.lead.post(url, free)).status).toBe(400);
  });
});

describe('an export', () => {
  const csvRows = (text: string) => {
    const [header = '', ...lines] = text.trimEnd().split('\r\n');
    const names = header.split(',');
    return lines.map((line) => {
      const fields = line.split(',');
      return Object.fromEntries(names.map((name, index) => [name, fields[index] ?? '']));
    });
  };
  const exported = async (query: string, accept: string) =>
    await places.lead.get(path(`trials${query}`), { accept });

  it('gives back what was uploaded, in both media types', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places));
    const people = [
      personOf(await arriveNew(places.ridge.stations[0], own)),
      personOf(await arriveNew(places.ridge.stations[0], own)),
    ];
    const rows = people.flatMap(allRowsOf);
    for (const row of rows.slice(3, 5)) row.note = 'Said "stop", then\r\nwent on';
    const missing = rows[1];
    if (missing === undefined) throw new Error('no row');
    missing.values = { 'pegs-dropped': 0, 'part-misseated': true };
    missing.missing = { 'pegboard-time': 'equipment-failure' };
    await upload(places.ridge.stations[0], own, rows.toReversed());

    const ndjson = await places.lead
      .get(`/v1/studies/${own}/trials`, { accept: 'application/x-ndjson' })
      .then(({ text, body }) => text ?? body.toString());
    const lines = ndjson
      .trimEnd()
      .split('\n')
      .map((line: string) => JSON.parse(line));
    const wanted = (row: Record<string, unknown>) => ({
      participant: row.participant,
      period: row.period,
      repetition: row.repetition,
      condition: row.condition,
      recordId: row.recordId,
      values: row.values,
      missing: row.missing,
      startedAt: row.startedAt,
      note: row.note ?? null,
    });
    expect(lines.map(wanted)).toEqual(rows.map(wanted));
    expect(lines[0]).toMatchObject({
      siteId: places.ridge.id,
      stratum: 'early',
      slotNumber: 1,
      protocolVersion: 1,
      assignedCondition: people[0]?.conditions[0],
      deviation: false,
      version: 1,
      current: true,
      erased: false,
    });

    const csv = await places.lead.get(`/v1/studies/${own}/trials`, { accept: 'text/csv' });
    expect(csv.headers['content-type']).toBe('text/csv; charset=utf-8');
    // The columns that an upload has come first: cut there, an export is an upload.
    const quoted = /"(?:[^"]|"")*"/g;
    const plain = csv.text.replace(quoted, 'quoted');
    const upTo = plain.split('\r\n')[0]?.split(',').indexOf('trialId') ?? 0;
    const kept = [...csv.text.matchAll(quoted)].map(([text]) => text);
    const cut = plain
      .split('\r\n')
      .map((line) => line.split(',').slice(0, upTo).join(','))
      .join('\r\n')
      .replaceAll('quoted', () => kept.shift() ?? '');
    const type = { 'content-type': 'text/csv' };
    const again = await places.ridge.stations[1].post(`/v1/studies/${own}/uploads`, cut, type);
    expect(again.body, again.text).toMatchObject({ rows: 24, repeated: 24, refused: 0 });
  });

  it('is in a fixed order, with every version when asked, and tombstones', async () => {
    const all = csvRows((await exported('?versions=all', 'text/csv')).text);
    const current = csvRows((await exported('', 'text/csv')).text);
    expect(current.every((row) => row.current === 'true')).toBe(true);
    expect(all.some((row) => row.current === 'false')).toBe(true);
    const place = (row: Record<string, string>) =>
      [row.participantId, row.period, row.repetition, row.version].join('/');
    expect(all.map(place)).toEqual(all.map(place).toSorted());
    const tombs = current.filter((row) => row.erased === 'true');
    expect(tombs.length).toBeGreaterThan(0);
    for (const row of tombs) {
      expect(row).toMatchObject({ participant: '', recordId: '', flags: '', 'pegboard-time': '' });
      expect(row.trialId).not.toBe('');
    }
    expect((await exported('', 'text/csv')).text).toBe((await exported('', 'text/csv')).text);
  });

  it('is a look: counted and logged, during enrolment or after it', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places));
    await places.analyst.get(`/v1/studies/${own}/trials`);
    await places.lead.post(`/v1/studies/${own}/closure`, {});
    await places.lead.get(`/v1/studies/${own}/trials`);
    const looks = await service.database.sql`
      select number, kind, during_enrolment from looks where study_id = ${own} order by number`;
    expect(looks.map((look) => ({ ...look }))).toEqual([
      { number: 1, kind: 'export', during_enrolment: true },
      { number: 2, kind: 'export', during_enrolment: false },
    ]);
    const [entry] = await service.database.sql<{ content: string }[]>`
      select content from audit_entries where chain = ${own} order by number desc limit 1`;
    expect(JSON.parse(entry?.content ?? '{}')).toMatchObject({
      action: 'looked',
      actor: { role: 'study-lead' },
    });
  });

  // published: RFC 9110 section 12.5.1, media ranges and their qualities.
  it('goes by the Accept header', async () => {
    const typeFor = async (accept: string) =>
      (await exported('', accept)).headers['content-type']?.split(';')[0];
    expect(await typeFor('*/*')).toBe('application/x-ndjson');
    expect(await typeFor('text/*')).toBe('text/csv');
    expect(await typeFor('text/csv;q=0.5, application/x-ndjson')).toBe('application/x-ndjson');
    expect(await typeFor('application/x-ndjson;q=0.1, */*;q=0.8')).toBe('text/csv');
    expect(await typeFor('text/html')).toBe('application/problem+json');
  });

  it('is for those who may see values by condition', async () => {
    for (const caller of [station(), places.harbour.coordinator, places.auditor]) {
      expect((await caller.get(path('trials'))).status).toBe(403);
    }
    expect((await places.otherLead.get(path('trials'))).status).toBe(404);
  });
});
