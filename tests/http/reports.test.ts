import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import {
  type AnalysedStudy,
  type ArrivedParticipant,
  arrive,
  registerStudy,
  uploadTrials,
} from '../support/analysed-study.ts';
import { filedReport, startWorker } from '../support/analysis-worker.ts';
import { startTestService, type TestService } from '../support/app.ts';

let service: TestService;
let study: AnalysedStudy;
let participants: ArrivedParticipant[];
let reportId: string;

beforeAll(async () => {
  service = await startTestService();
  await startWorker(service.databaseUrl);
  study = await registerStudy(service);
  participants = await arrive(study, 4);
  await uploadTrials(study, participants);
  reportId = await filedReport(study);
});

afterAll(() => service.close());

const recomputed = (id = reportId) => study.auditor.post(`/v1/reports/${id}/recomputations`);

/** Changes rows that the database protects, as only its administrator could. */
async function tamper(table: 'reports' | 'snapshots', work: string, values: string[]) {
  await service.database.sql.begin(async (tx) => {
    await tx.unsafe(`alter table ${table} disable trigger user`);
    await tx.unsafe(work, values);
    await tx.unsafe(`alter table ${table} enable trigger user`);
  });
}

// common practice, no source: what the database itself refuses holds whoever writes the code.
describe('a filed report and its snapshot in the database', () => {
  const statements = [
    'update reports set body = body',
    'update reports set number = number + 1',
    'delete from reports',
    'truncate reports cascade',
    'update snapshots set sha256 = sha256',
    'delete from snapshots',
    'truncate snapshots cascade',
  ];
  it.each(statements)('cannot be touched by: %s', async (statement) => {
    await expect(service.database.sql.unsafe(statement)).rejects.toMatchObject({
      code: '23001', // published: PostgreSQL, Appendix A, restrict_violation
    });
  });

  it('has one report an analysis and one number a study', async () => {
    const copy = (change: string) =>
      service.database.sql.unsafe(
        `insert into reports select gen_random_uuid(), study_id, ${change}, snapshot_id,
           protocol_version, protocol_sha256, snapshot_sha256, engine_version, seed, body, sha256,
           page, page_sha256, requested_by, created_at from reports where id = '${reportId}'`,
      );
    await expect(copy('number + 1000, analysis_id')).rejects.toMatchObject({ code: '23505' });
    await expect(copy('number, gen_random_uuid()')).rejects.toMatchObject({ code: '23505' });
  });

  it('keeps measured values out of what cannot be erased', async () => {
    const rows = await service.database.sql<{ body: string }[]>`
      select s.body from snapshots s join reports r on r.snapshot_id = s.id
      where r.id = ${reportId}`;
    const snapshot = JSON.parse(rows[0]?.body ?? '');
    expect(snapshot.participants).toHaveLength(participants.length);
    for (const participant of snapshot.participants) {
      expect(participant.contentCommitment).toMatch(/^[0-9a-f]{64}$/);
      expect(participant.content).toBeUndefined();
    }
    for (const { code } of participants) expect(rows[0]?.body).not.toContain(code);
  });
});

describe('a report computed again', () => {
  it('has the same bytes, and the log says that it was done', async () => {
    const answer = await recomputed();
    expect(answer.status).toBe(200);
    const { body: report } = await study.lead.get(`/v1/reports/${reportId}`);
    expect(answer.body).toEqual({
      same: true,
      sha256: report.sha256,
      filedSha256: report.sha256,
      pageSame: true,
      engineVersion: report.engineVersion,
      filedEngineVersion: report.engineVersion,
    });
    const entries = await study.auditor.get(`/v1/audit/chains/${study.studyId}/entries?limit=500`);
    const last = JSON.parse(entries.body.items.at(-1).content);
    expect(last).toMatchObject({ action: 'report-recomputed', subject: reportId });
    expect(last.details.same).toBe(true);
  });

  it('has the same bytes from many callers at once', async () => {
    const answers = await Promise.all([1, 2, 3, 4].map(() => recomputed()));
    expect(answers.map((answer) => answer.body.same)).toEqual([true, true, true, true]);
  });

  it('does not exist for another lab', async () => {
    const attempts = await Promise.all([
      study.stranger.get(`/v1/reports/${reportId}`),
      study.stranger.get(`/v1/reports/${reportId}/body`),
      study.stranger.get(`/v1/reports/${reportId}/page`),
      study.stranger.post(`/v1/reports/${reportId}/recomputations`),
      study.stranger.get(`/v1/studies/${study.studyId}/reports`),
    ]);
    expect(attempts.map((answer) => answer.status)).toEqual([404, 404, 404, 404, 404]);
    expect((await study.station.get(`/v1/reports/${reportId}`)).status).toBe(403);
  });
});

describe('a report that somebody altered in the database', () => {
  it('is not served, and its recomputation differs', async () => {
    const altered = await filedReport(study);
    await tamper(
      'reports',
      `update reports set body = replace(body, '"formatVersion":1', '"formatVersion":2')
       where id = $1`,
      [altered],
    );
    for (const part of ['', '/body', '/page']) {
      const answer = await study.lead.get(`/v1/reports/${altered}${part}`);
      expect([answer.status, answer.body.type]).toEqual([500, '/problems/report-altered']);
    }
    expect((await recomputed(altered)).body).toMatchObject({ same: false, pageSame: true });
  });

  it('differs on recomputation even when its hash was made to fit', async () => {
    const altered = await filedReport(study);
    await tamper(
      'reports',
      `update reports set body = '{}', sha256 = encode(sha256('{}'), 'hex') where id = $1`,
      [altered],
    );
    expect((await study.lead.get(`/v1/reports/${altered}`)).status).toBe(200);
    expect((await recomputed(altered)).body.same).toBe(false);
  });

  it('cannot be recomputed from a snapshot that was altered', async () => {
    const altered = await filedReport(study);
    await tamper(
      'snapshots',
      `update snapshots set body = replace(body, '"enrolling"', '"closed"')
       where id = (select snapshot_id from reports where id = $1)`,
      [altered],
    );
    const body = await recomputed(altered);
    expect([body.status, body.body.type]).toEqual([500, '/problems/report-altered']);

    const contents = await filedReport(study);
    await service.database.sql`
      update snapshot_participants set content = replace(content, '"period":1', '"period":2')
      where snapshot_id = (select snapshot_id from reports where id = ${contents})`;
    const values = await recomputed(contents);
    expect([values.status, values.body.type]).toEqual([500, '/problems/report-altered']);
  });
});

describe('a report on a participant who was erased since', () => {
  it('can still be read, but not be computed again', async () => {
    const [first] = participants;
    const erasure = await study.lead.post(
      `/v1/studies/${study.studyId}/participants/${first?.code}/erasure`,
      { reasonCode: 'participant-request' },
    );
    expect(erasure.status).toBeLessThan(300);
    const left = await service.database.sql`
      select 1 from snapshot_participants where participant_id = ${first?.id ?? ''}`;
    expect(left).toHaveLength(0);

    expect((await study.lead.get(`/v1/reports/${reportId}`)).status).toBe(200);
    const answer = await recomputed();
    expect([answer.status, answer.body.type]).toEqual([410, '/problems/snapshot-erased']);
    expect(answer.body.detail).toContain('The data of 1 participant under report');
  });

  it('is followed by a report without them, which can be computed again', async () => {
    const after = await filedReport(study);
    expect((await recomputed(after)).body.same).toBe(true);
  });
});
