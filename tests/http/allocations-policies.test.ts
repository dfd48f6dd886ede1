import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import type { ProtocolDocument } from '#server/studies/schemas.ts';
import { startTestService, type TestService } from '../support/app.ts';
import {
  arriveNew,
  type ColdStore,
  coldStore,
  coldStoreProtocol,
  draftStudy,
  openStudy,
} from '../support/cold-store.ts';

type Policy = ProtocolDocument['policy'];

/** With the widest difference of counts in a cell that the policy promises, if it promises one. */
const POLICIES: readonly { policy: Policy; widest: number | null }[] = [
  { policy: { kind: 'balanced' }, widest: 1 },
  { policy: { kind: 'permuted-blocks', multiples: [1, 2] }, widest: 2 },
  {
    policy: {
      kind: 'minimisation',
      imbalance: 'range',
      weights: { site: 2, study: 1, factors: [{ factor: 'shift', weight: 1 }] },
      bestProbability: 0.9,
    },
    widest: null,
  },
];

let service: TestService;
let places: ColdStore;

beforeAll(async () => {
  service = await startTestService();
  places = await coldStore(service);
});
afterAll(() => service.close());

function withPolicy(policy: Policy): ProtocolDocument {
  return { ...coldStoreProtocol(places, 60), policy };
}

/** Thirty check-ins, three at a time at three sites and in two strata. */
async function enrol(studyId: string): Promise<void> {
  const { harbour, ridge, fen } = places;
  for (let round = 0; round < 10; round += 1) {
    const stratum = { shift: round % 3 === 0 ? 'late' : 'early' };
    const answers = await Promise.all(
      [harbour, ridge, fen].map(({ stations }) => arriveNew(stations[0], studyId, { stratum })),
    );
    expect(answers.map(({ status }) => status)).toEqual([201, 201, 201]);
  }
}

describe.each(POLICIES)('the policy $policy.kind', ({ policy, widest }) => {
  it('hands out as promised, and its replay finds a changed sequence', async () => {
    const studyId = await openStudy(places.lead, withPolicy(policy));
    await enrol(studyId);
    const balance = await places.lead.get(`/v1/studies/${studyId}/balance`);
    const cells: { planned: number[] }[] = balance.body.cells;
    expect(cells.flatMap(({ planned }) => planned).reduce((a, b) => a + b, 0)).toBe(30);
    for (const { planned } of widest === null ? [] : cells) {
      expect(Math.max(...planned) - Math.min(...planned)).toBeLessThanOrEqual(widest ?? 0);
    }
    await places.lead.post(`/v1/studies/${studyId}/closure`, {});
    const replays = `/v1/studies/${studyId}/replays`;
    const clean = await places.auditor.post(replays);
    expect(clean.body).toMatchObject({ agrees: true, verified: 30, slotsIssued: 30 });
    const { sql } = service.database;
    await sql`alter table slots disable trigger slots_immutable`;
    await sql`
      update slots set sequence_index = (sequence_index + 1) % 4
      where study_id = ${studyId} and issue_number = 17`;
    await sql`alter table slots enable trigger slots_immutable`;
    const changed = await places.auditor.post(replays);
    expect(changed.body).toMatchObject({
      agrees: false,
      verified: 16,
      firstDifference: { kind: 'sequence', issueNumber: 17 },
    });
  });
});

describe('a policy that cannot be', () => {
  it('is named when the draft is checked, and refused at registration', async () => {
    const policy: Policy = { kind: 'permuted-blocks', multiples: [0] };
    const studyId = await draftStudy(places.lead, withPolicy(policy));
    const path = `/v1/studies/${studyId}`;
    const checked = await places.lead.post(`${path}/protocol-draft/check`);
    expect(checked.text).toContain('unusable-block-multiple');
    const refused = await places.lead.post(`${path}/protocol-versions`, { revision: 1 });
    expect(refused.status).toBe(422);
    expect(refused.body.faults[0]).toMatchObject({
      pointer: '/policy/multiples/0',
      code: 'unusable-block-multiple',
    });
  });
});
