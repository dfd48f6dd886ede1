import { randomUUID } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { markPeriodsCompleted } from '#server/allocations/service.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  openStudy,
} from '../support/cold-store.ts';

const MINUTE = 60_000;
const DAY = 86_400_000;

let service: TestService;
let places: ColdStore;
let studyId: string;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
  // Washout between periods: at least 20 minutes, at most 14 days.
  studyId = await openStudy(places.lead, coldStoreProtocol(places, 60));
});
afterAll(() => service.close());

interface Person {
  readonly id: string;
  readonly code: string;
  /** Condition keys by period. */
  readonly sequence: readonly string[];
  readonly path: string;
}

/** Somebody who arrived so many days ago: the row is put back, since no test can wait. */
async function arrivedDaysAgo(days: number): Promise<Person> {
  const answer = await arriveNew(places.harbour.stations[0], studyId);
  const { id, code } = answer.body.participant;
  const at = new Date(Date.now() - days * DAY);
  await service.database.sql`update participants set arrived_at = ${at} where id = ${id}`;
  const periods: { condition: { key: string } }[] = answer.body.periods;
  return {
    id,
    code,
    sequence: periods.map(({ condition }) => condition.key),
    path: `/v1/studies/${studyId}/participants/${code}`,
  };
}

const station = () => places.harbour.stations[0];
const ago = (ms: number) => new Date(Date.now() - ms).toISOString();

function begin(person: Person, period: number, startedAt?: string, reason?: string, key?: string) {
  return station().post(
    `${person.path}/period-starts`,
    {
      period,
      ...(startedAt === undefined ? {} : { startedAt }),
      ...(reason === undefined ? {} : { deviation: { reason } }),
    },
    key === undefined ? {} : { 'idempotency-key': key },
  );
}

const problemOf = (answer: { status: number; body: { type?: string } }) => [
  answer.status,
  answer.body.type?.replace('/problems/', ''),
];
const codesOf = (answer: { body: { faults: { code: string }[] } }) =>
  answer.body.faults.map(({ code }) => code);

describe('what is due', () => {
  it('is the first period at once, then each after its washout, until finished', async () => {
    const person = await arrivedDaysAgo(3);
    const first = await station().get(`${person.path}/due`);
    expect(first.body).toMatchObject({
      participant: { id: person.id, code: person.code },
      state: 'due',
      period: 1,
      visit: 1,
      condition: { key: person.sequence[0] },
      dueFrom: null,
      dueUntil: null,
      washout: { minimum: 'PT20M', maximum: 'P14D' },
    });
    const startedAt = ago(5 * MINUTE);
    const started = await begin(person, 1, startedAt);
    expect(started.status).toBe(201);
    expect(started.body).toMatchObject({
      participantId: person.id,
      period: 1,
      condition: { key: person.sequence[0] },
      startedAt,
      deviations: [],
    });
    // The other station of the site is asked: periods may be taken at either.
    const second = await places.harbour.stations[1].get(`${person.path}/due`);
    expect(second.body).toMatchObject({
      state: 'too-early',
      period: 2,
      condition: { key: person.sequence[1] },
      dueFrom: new Date(Date.parse(startedAt) + 20 * MINUTE).toISOString(),
      dueUntil: new Date(Date.parse(startedAt) + 14 * DAY).toISOString(),
    });
  });

  it('is judged when it happened, not when it is reported', async () => {
    const person = await arrivedDaysAgo(3);
    for (const [period, minutesAgo] of [
      [1, 120],
      [2, 100],
      [3, 80],
      [4, 60],
    ] as const) {
      const answer = await begin(person, period, ago(minutesAgo * MINUTE));
      expect([answer.status, answer.body.deviations]).toEqual([201, []]);
    }
    const due = await station().get(`${person.path}/due`);
    expect(due.body).toMatchObject({
      state: 'finished',
      period: null,
      visit: null,
      condition: null,
      dueFrom: null,
    });
    const returning = await station().post(`/v1/studies/${studyId}/arrivals`, {
      kind: 'returning',
      code: person.code,
    });
    const starts: (string | null)[] = returning.body.periods.map(
      (period: { startedAt: string | null }) => period.startedAt,
    );
    expect(starts.every((start) => start !== null)).toBe(true);
  });

  it('is late after the maximum of the washout', async () => {
    const person = await arrivedDaysAgo(40);
    await begin(person, 1, ago(20 * DAY));
    const due = await station().get(`${person.path}/due`);
    expect(due.body).toMatchObject({ state: 'too-late', period: 2 });
    const refused = await begin(person, 2);
    expect(problemOf(refused)).toEqual([409, 'period-not-due']);
    expect(codesOf(refused)).toEqual(['too-late']);
    const kept = await begin(person, 2, undefined, 'Was away ill.');
    expect(kept.body.deviations).toEqual(['too-late']);
  });
});

describe('starting a period', () => {
  it('too early or out of turn is refused without a reason, and kept with one', async () => {
    const person = await arrivedDaysAgo(1);
    await begin(person, 1, ago(5 * MINUTE));
    const refused = await begin(person, 3);
    expect(problemOf(refused)).toEqual([409, 'period-not-due']);
    expect(codesOf(refused)).toEqual(['out-of-turn', 'too-early']);
    const reason = 'The merino liner was in the wash.';
    const kept = await begin(person, 3, undefined, reason);
    expect(kept.body.deviations).toEqual(['out-of-turn', 'too-early']);
    const shown = await places.lead.get(person.path);
    expect(
      shown.body.periods.map(({ deviations }: { deviations: string[] }) => deviations),
    ).toEqual([[], ['out-of-turn', 'too-early']]);
    // The period that was passed over is still the one that is due.
    const due = await station().get(`${person.path}/due`);
    expect(due.body).toMatchObject({ period: 2, state: 'too-early' });
    const log = await places.lead.get(`/v1/audit/chains/${studyId}/entries?limit=500`);
    const entries = log.body.items.map((item: { content: string }) => JSON.parse(item.content));
    const entry = entries.findLast((one: { action: string }) => one.action === 'period-started');
    expect(entry).toMatchObject({
      subject: person.id,
      details: { period: 3, deviations: ['out-of-turn', 'too-early'] },
    });
    expect(entry.details.reason).toMatch(/^[0-9a-f]{64}$/);
    expect(JSON.stringify(log.body)).not.toContain('merino liner');
    const disclosed = await service.database.sql`
      select value from disclosures where commitment = ${entry.details.reason}`;
    expect(JSON.parse(disclosed[0]?.value)).toBe(reason);
    const verification = await places.lead.post('/v1/audit/verifications', {});
    expect(verification.body.intact).toBe(true);
  });

  it('twice is refused, unless it repeats its key', async () => {
    const person = await arrivedDaysAgo(1);
    const key = randomUUID();
    const startedAt = ago(MINUTE);
    const first = await begin(person, 1, startedAt, undefined, key);
    const repeat = await begin(person, 1, startedAt, undefined, key);
    expect(repeat.status).toBe(201);
    expect(repeat.body).toEqual(first.body);
    const second = await begin(person, 1);
    expect(problemOf(second)).toEqual([409, 'period-already-started']);
    const twins = await Promise.all([
      begin(person, 2, undefined, 'In a hurry.'),
      begin(person, 2, undefined, 'In a hurry.'),
    ]);
    expect(twins.map(({ status }) => status).sort()).toEqual([201, 409]);
  });

  it('reported in another order than it happened is judged by what came before', async () => {
    const person = await arrivedDaysAgo(1);
    const second = await begin(person, 2, ago(30 * MINUTE), 'The queue of the other station.');
    expect(second.body.deviations).toEqual(['out-of-turn']);
    const first = await begin(person, 1, ago(55 * MINUTE));
    expect([first.status, first.body.deviations]).toEqual([201, []]);
  });

  it('is refused for a period or a time that cannot be', async () => {
    const person = await arrivedDaysAgo(1);
    for (const [period, startedAt, pointer, code] of [
      [5, undefined, '/period', 'unknown-period'],
      [1, ago(-5 * MINUTE), '/startedAt', 'in-the-future'],
      [1, ago(2 * DAY), '/startedAt', 'before-arrival'],
    ] as const) {
      const refused = await begin(person, period, startedAt);
      expect(problemOf(refused)).toEqual([400, 'invalid-request']);
      expect(refused.body.faults).toMatchObject([{ pointer, code }]);
    }
    // A clock that is half a minute fast is taken as now.
    const fast = await begin(person, 1, ago(-30_000));
    expect(fast.status).toBe(201);
    expect(Date.parse(fast.body.startedAt)).toBeLessThanOrEqual(Date.now());
  });
});

describe('the view of balance', () => {
  it('counts planned and completed by site, period and ordered pair', async () => {
    const own = await openStudy(places.lead, coldStoreProtocol(places, 8));
    const people: Person[] = [];
    for (const [site, shift] of [
      ['harbour', 'early'],
      ['harbour', 'late'],
      ['fen', 'early'],
    ] as const) {
      for (let index = 0; index < 4; index += 1) {
        const [bench] = places[site].stations;
        const answer = await arriveNew(bench, own, { stratum: { shift } });
        const periods: { condition: { key: string } }[] = answer.body.periods;
        const { id, code } = answer.body.participant;
        people.push({
          id,
          code,
          path: '',
          sequence: periods.map(({ condition }) => condition.key),
        });
      }
    }
    const [whole, half] = people;
    if (whole === undefined || half === undefined) throw new Error('nobody arrived');
    const at = new Date();
    await service.database.inSqlTransaction((tx) =>
      markPeriodsCompleted(tx, [
        ...[1, 2, 3, 4].map((period) => ({ participantId: whole.id, period, at })),
        ...[1, 2].map((period) => ({ participantId: half.id, period, at })),
      ]),
    );
    const answer = await places.analyst.get(`/v1/studies/${own}/balance`);
    expect(answer.status).toBe(200);
    const balance = answer.body;
    expect(balance).toMatchObject({ protocolVersion: 1 });
    expect(balance.cells).toHaveLength(6);
    for (const cell of balance.cells) {
      const planned = cell.siteId === places.ridge.id || isLateFen(cell) ? 0 : 1;
      expect(cell.planned).toEqual([planned, planned, planned, planned]);
    }
    const harbour = balance.sites.find(
      (site: { siteId: string }) => site.siteId === places.harbour.id,
    );
    expect(harbour).toMatchObject({ targetEnrolment: 8, slotsIssued: 8, planned: [2, 2, 2, 2] });
    const index = balance.sequences.findIndex(
      (sequence: string[]) => sequence.join() === whole.sequence.join(),
    );
    expect(harbour.completed).toEqual([0, 1, 2, 3].map((one) => (one === index ? 1 : 0)));

    // Counted again here, from the sequences that were answered.
    for (const { condition, planned, completed } of balance.conditionByPeriod) {
      expect(planned).toEqual([3, 3, 3, 3]);
      const count = (person: Person, periods: number) =>
        [0, 1, 2, 3].map((place) =>
          place < periods && person.sequence[place] === condition ? 1 : 0,
        );
      const ofHalf = count(half, 2);
      expect(completed).toEqual(count(whole, 4).map((one, place) => one + (ofHalf[place] ?? 0)));
    }
    for (const { first, second, planned, completed } of balance.orderedPairs) {
      expect(planned).toBe(first === second ? 0 : 3);
      const follows = (person: Person, periods: number) =>
        person.sequence
          .slice(0, periods)
          .filter((key, place, all) => place > 0 && all[place - 1] === first && key === second)
          .length;
      expect(completed).toBe(follows(whole, 4) + follows(half, 2));
    }
    expect(problemOf(await places.otherLead.get(`/v1/studies/${own}/balance`))).toEqual([
      404,
      'not-found',
    ]);
    for (const caller of [places.harbour.coordinator, places.harbour.stations[0]]) {
      expect(problemOf(await caller.get(`/v1/studies/${own}/balance`))).toEqual([
        403,
        'not-permitted',
      ]);
    }
    const unknown = await places.lead.get(`/v1/studies/${own}/balance?protocolVersion=2`);
    expect(problemOf(unknown)).toEqual([404, 'not-found']);
  });
});

function isLateFen(cell: { siteId: string; stratum: string }): boolean {
  return cell.siteId === places.fen.id && cell.stratum === 'late';
}
