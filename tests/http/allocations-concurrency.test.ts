import { randomUUID } from 'node:crypto';
import request from 'supertest';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { startTestService, type TestService } from '../support/app.ts';
import {
  type ColdStore,
  coldStore,
  newSite,
  openStudy,
  type TestSite,
} from '../support/cold-store.ts';
import { exampleProtocol } from '../support/example-protocol.ts';

const ARRIVALS = 200;
const SHIFTS = ['early', 'late'];
const SITE_TURNS = [0, 1, 2, 0, 3, 1, 0, 4, 2, 1, 3];

let service: TestService;
let places: ColdStore;
let sites: TestSite[];
let studyId: string;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
  const { harbour, ridge, fen, labId } = places;
  sites = [
    harbour,
    ridge,
    fen,
    await newSite(service, labId, 'Quay'),
    await newSite(service, labId, 'Moor'),
  ];
  const protocol = exampleProtocol(sites.map(({ id }) => ({ siteId: id, targetEnrolment: 60 })));
  studyId = await openStudy(places.lead, protocol);
});
afterAll(() => service.close());

interface Arrived {
  readonly siteId: string;
  readonly slotNumber: number;
  readonly stratum: string;
  readonly periods: readonly { readonly condition: { readonly key: string } }[];
}

describe('200 arrivals at once over 5 sites and 2 strata', () => {
  it('get 200 slots without gap at each site, within one in every cell', async () => {
    const instances = await Promise.all([1, 2, 3].map(() => service.startInstance()));
    const answers = await Promise.all(
      Array.from({ length: ARRIVALS }, async (_, index) => {
        // Uneven on purpose: cells of different sizes, so that none is even by accident.
        const site = sites[SITE_TURNS[index % SITE_TURNS.length] ?? 0];
        const shift = SHIFTS[index % 7 < 4 ? 0 : 1];
        const url = instances[index % 3];
        if (site === undefined || url === undefined) throw new Error('out of range');
        return await request(url)
          .post(`/v1/studies/${studyId}/arrivals`)
          .set({
            authorization: `Bearer ${site.stationTokens[index % 2]}`,
            'operator-code': `op-${index % 4}`,
            'idempotency-key': randomUUID(),
          })
          .send({ kind: 'new', stratum: { shift } });
      }),
    );
    expect(answers.map(({ status }) => status)).toEqual(new Array(ARRIVALS).fill(201));
    const arrived: Arrived[] = answers.map(({ body }) => body);

    const slots = new Set(arrived.map(({ siteId, slotNumber }) => `${siteId}/${slotNumber}`));
    expect(slots.size).toBe(ARRIVALS);
    for (const [, here] of Map.groupBy(arrived, ({ siteId }) => siteId)) {
      const numbers = here.map(({ slotNumber }) => slotNumber).sort((a, b) => a - b);
      expect(numbers).toEqual(Array.from({ length: here.length }, (_, index) => index + 1));
    }
    const cells = Map.groupBy(arrived, ({ siteId, stratum }) => `${siteId}/${stratum}`);
    for (const [, here] of cells) expectWithinOne(here);

    const rows = await service.database.sql<{ issueNumber: number }[]>`
      select issue_number as "issueNumber" from slots where study_id = ${studyId}
      order by issue_number`;
    expect(rows.map(({ issueNumber }) => issueNumber)).toEqual(
      Array.from({ length: ARRIVALS }, (_, index) => index + 1),
    );

    // What is counted in the view is what was answered.
    const balance = (await places.lead.get(`/v1/studies/${studyId}/balance`)).body;
    for (const cell of balance.cells) {
      const here = cells.get(`${cell.siteId}/${cell.stratum}`) ?? [];
      const counts = balance.sequences.map(
        (sequence: string[]) => here.filter((one) => sequenceOf(one) === sequence.join()).length,
      );
      expect(cell.planned).toEqual(counts);
    }
  });

  it('replay from the revealed secret, and a changed row is found where it is', async () => {
    const { lead, auditor } = places;
    const replays = `/v1/studies/${studyId}/replays`;
    const early = await auditor.post(replays);
    expect([early.status, early.body.type]).toEqual([409, '/problems/wrong-state']);
    await lead.post(`/v1/studies/${studyId}/closure`, {});
    const clean = await auditor.post(replays);
    expect(clean.status).toBe(200);
    expect(clean.body).toMatchObject({
      agrees: true,
      verified: ARRIVALS,
      slotsIssued: ARRIVALS,
      firstDifference: null,
    });
    const secret = await auditor.get(`/v1/studies/${studyId}/allocation-secret`);
    expect(clean.body.secretHash).toBe(secret.body.secretHash);

    await tampering(
      (sql) => sql`
        update slots set sequence_index = (sequence_index + 1) % 4
        where study_id = ${studyId} and issue_number = 77`,
    );
    const changed = await auditor.post(replays);
    expect(changed.body).toMatchObject({
      agrees: false,
      verified: 76,
      firstDifference: { kind: 'sequence', issueNumber: 77 },
    });
    await tampering(
      (sql) => sql`
        update slots set sequence_index = (sequence_index + 3) % 4
        where study_id = ${studyId} and issue_number = 77`,
    );
    await tampering(
      (sql) => sql`
        with gone as (delete from occupancies where slot_id in (
          select id from slots where study_id = ${studyId} and issue_number = ${ARRIVALS}))
        select 1`,
    );
    await tampering(
      (sql) => sql`
        delete from slots where study_id = ${studyId} and issue_number = ${ARRIVALS}`,
    );
    const cut = await auditor.post(replays);
    expect(cut.body).toMatchObject({
      agrees: false,
      verified: ARRIVALS - 1,
      firstDifference: { kind: 'slot-count', issueNumber: null },
    });
  });
});

/** As a database administrator could: with the guard of the table switched off. */
async function tampering(
  change: (sql: TestService['database']['sql']) => PromiseLike<unknown>,
): Promise<void> {
  const { sql } = service.database;
  await sql`alter table slots disable trigger slots_immutable`;
  await change(sql);
  await sql`alter table slots enable trigger slots_immutable`;
}

function sequenceOf(arrived: Arrived): string {
  return arrived.periods.map(({ condition }) => condition.key).join();
}

/** Counted here from the answers alone: the four sequences of the scheme, absent ones as 0. */
function expectWithinOne(cell: readonly Arrived[]): void {
  const counts = [...Map.groupBy(cell, sequenceOf).values()].map((group) => group.length);
  const all = [...counts, ...new Array<number>(4 - counts.length).fill(0)];
  expect(Math.max(...all) - Math.min(...all)).toBeLessThanOrEqual(1);
}
