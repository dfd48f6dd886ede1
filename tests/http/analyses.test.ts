import { createHash } from 'node:crypto';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import {
  type AnalysedStudy,
  arrive,
  gloveProtocol,
  registerStudy,
  type UploadedTrial,
  uploadTrials,
} from '../support/analysed-study.ts';
import { type AnalysisState, filedReport, startWorker } from '../support/analysis-worker.ts';
import { startTestService, type TestService } from '../support/app.ts';

let service: TestService;
let study: AnalysedStudy;
let base: string;

beforeAll(async () => {
  service = await startTestService();
  study = await registerStudy(service);
  base = `/v1/studies/${study.studyId}`;
});

afterAll(() => service.close());

const actionsOf = async (subject: string): Promise<string[]> => {
  const rows = await service.database.sql<{ action: string }[]>`
    select content::json->>'action' as action from audit_entries
    where chain = ${study.studyId} and content::json->>'subject' = ${subject} order by number`;
  return rows.map((row) => row.action);
};

// common practice, no source: a job that nobody has taken can be asked about and taken back.
describe('an analysis without a worker', () => {
  it('waits, and is cancelled at once', async () => {
    const requested = await study.analyst.post(`${base}/analyses`, {});
    expect(requested.status).toBe(202);
    expect(requested.body).toMatchObject({
      studyId: study.studyId,
      protocolVersion: 1,
      state: 'queued',
      progress: 0,
      requestedBy: { role: 'analyst' },
      startedAt: null,
      finishedAt: null,
      cancelRequested: false,
      failure: null,
      reportId: null,
    });
    expect(requested.body.seed).toMatch(/^[0-9a-f]{32}$/);

    const { id } = requested.body;
    const cancelled = await study.lead.post(`/v1/analyses/${id}/cancellation`);
    expect(cancelled.status).toBe(200);
    expect(cancelled.body).toMatchObject({ state: 'cancelled', cancelRequested: true });
    expect(cancelled.body.finishedAt).not.toBeNull();
    const again = await study.lead.post(`/v1/analyses/${id}/cancellation`);
    expect([again.status, again.body.type]).toEqual([409, '/problems/analysis-finished']);
    expect(await actionsOf(id)).toEqual(['analysis-requested', 'analysis-cancelled']);

    const events = await study.lead.get(`/v1/analyses/${id}/events`);
    expect(eventNames(events.text)).toEqual(['ended']);
  });

  it('is the same analysis when its request is repeated with its key, and one job', async () => {
    const key = { 'idempotency-key': crypto.randomUUID() };
    const seed = '000102030405060708090a0b0c0d0e0f';
    const first = await study.lead.post(`${base}/analyses`, { seed }, key);
    const second = await study.lead.post(`${base}/analyses`, { seed }, key);
    expect(first.body.seed).toBe(seed);
    expect(second.body).toEqual(first.body);
    const jobs = await service.database.sql`
      select id from pgboss.job where data->>'subjectId' = ${first.body.id}`;
    expect(jobs).toHaveLength(1);
    await study.lead.post(`/v1/analyses/${first.body.id}/cancellation`);
  });

  it('is refused without a registered protocol and for a seed that is none', async () => {
    const draft = await study.lead.post('/v1/studies', { name: 'Not registered yet' });
    const early = await study.lead.post(`/v1/studies/${draft.body.id}/analyses`, {});
    expect([early.status, early.body.type]).toEqual([409, '/problems/wrong-state']);
    const seed = await study.lead.post(`${base}/analyses`, { seed: 'abc' });
    expect(seed.status).toBe(400);
    expect(seed.body.faults[0].pointer).toBe('/seed');
  });

  it('does not exist for another lab, and is not for stations', async () => {
    const requested = await study.lead.post(`${base}/analyses`, {});
    const { id } = requested.body;
    const attempts = await Promise.all([
      study.stranger.get(`/v1/analyses/${id}`),
      study.stranger.get(`/v1/analyses/${id}/events`),
      study.stranger.post(`/v1/analyses/${id}/cancellation`),
      study.stranger.get(`${base}/analyses`),
      study.stranger.post(`${base}/analyses`, {}),
    ]);
    expect(attempts.map((answer) => answer.status)).toEqual([404, 404, 404, 404, 404]);
    expect((await study.station.get(`/v1/analyses/${id}`)).status).toBe(403);
    expect((await study.auditor.get(`/v1/analyses/${id}`)).status).toBe(200);
    expect((await study.auditor.post(`/v1/analyses/${id}/cancellation`)).status).toBe(403);
    await study.lead.post(`/v1/analyses/${id}/cancellation`);
  });
});

describe('an analysis with a worker', () => {
  let trials: UploadedTrial[];

  beforeAll(async () => {
    trials = await uploadTrials(study, await arrive(study, 6));
    await startWorker(service.databaseUrl);
  });

  it('goes from arrivals and uploads to a numbered report', async () => {
    const reportId = await filedReport(study, { seed: 'ffeeddccbbaa99887766554433221100' });
    const report = await study.lead.get(`/v1/reports/${reportId}`);
    expect(report.status).toBe(200);
    expect(report.body).toMatchObject({
      number: 1,
      studyId: study.studyId,
      protocolVersion: 1,
      seed: 'ffeeddccbbaa99887766554433221100',
      requestedBy: { role: 'study-lead' },
    });
    const { body } = report.body;
    expect(body.looks).toEqual([{ kind: 'analysis', duringEnrolment: true, count: 1 }]);
    expect(body.snapshot.sha256).toBe(report.body.snapshotSha256);
    expect(body.protocol.sha256).toBe(report.body.protocolSha256);
    expect(body.engineVersion).toContain(`node ${process.versions.node}`);
    expect(body.result.participantFlow.overall).toMatchObject({ arrived: 6, completed: 6 });
    const [measure] = body.result.measures;
    expect([measure.measure, measure.method.method]).toEqual(['time', 'repeated-measures-anova']);
    // published: with two conditions F is the square of the paired t, on 1 and n − 1 degrees of
    // freedom (any text on repeated measures). Here from the uploaded rows, in plain steps.
    const [effect] = measure.method.anova.effects;
    expect([effect.degreesOfFreedom, effect.errorDegreesOfFreedom]).toEqual([1, 5]);
    expect(effect.fStatistic / pairedT(trials) ** 2).toBeCloseTo(1, 9);
    expect(await actionsOf(reportId)).toEqual(['report-filed']);
  });

  it('serves the exact bytes, with their digest, and a page that needs nothing else', async () => {
    const reportId = await filedReport(study);
    const { body: report } = await study.auditor.get(`/v1/reports/${reportId}`);
    const bytes = await study.auditor.get(`/v1/reports/${reportId}/body`);
    expect(bytes.headers['content-type']).toMatch(/^application\/json/);
    const digest = createHash('sha256').update(bytes.text, 'utf8');
    expect(bytes.headers['repr-digest']).toBe(`sha-256=:${digest.copy().digest('base64')}:`);
    expect(digest.digest('hex')).toBe(report.sha256);
    expect(JSON.parse(bytes.text)).toEqual(report.body);

    const page = await study.auditor.get(`/v1/reports/${reportId}/page`);
    expect(page.headers['content-type']).toBe('text/html; charset=utf-8');
    expect(createHash('sha256').update(page.text, 'utf8').digest('hex')).toBe(report.pageSha256);
    expect(page.text).toContain('Two glove liners');
    // The policy of the answer forbids scripts and anything fetched; the page has neither.
    expect(page.headers['content-security-policy']).toContain("default-src 'none'");
    expect(page.text).not.toMatch(/<script|<link|src="(?!data:)|@import|url\((?!data:|#)/i);
  });

  it('gives two analyses at once the next two numbers', async () => {
    await startWorker(service.databaseUrl);
    const before = await study.lead.get(`${base}/reports`);
    const last: number = before.body.items[0].number;
    const ids = await Promise.all([filedReport(study), filedReport(study)]);
    const reports = await Promise.all(ids.map((id) => study.lead.get(`/v1/reports/${id}`)));
    const numbers = reports.map((report) => report.body.number).sort((a, b) => a - b);
    expect(numbers).toEqual([last + 1, last + 2]);
    const listed = await study.lead.get(`${base}/reports?limit=1`);
    expect(listed.body.items[0].number).toBe(last + 2);
    const next = await study.lead.get(`${base}/reports?limit=1&cursor=${listed.body.nextCursor}`);
    expect(next.body.items[0].number).toBe(last + 1);
    expect(next.body.items[0].body).toBeUndefined();
  });

  it('streams progress and then its end', async () => {
    const requested = await study.lead.post(`${base}/analyses`, {});
    const events = await study.lead.get(`/v1/analyses/${requested.body.id}/events`);
    expect(events.status).toBe(200);
    expect(events.headers['content-type']).toBe('text/event-stream; charset=utf-8');
    expect(events.headers['x-content-type-options']).toBe('nosniff');
    const names = eventNames(events.text);
    expect(names[0]).toBe('progress');
    expect(names.filter((name) => name === 'ended')).toHaveLength(1);
    expect(names.at(-1)).toBe('ended');
    const last = eventData(events.text).at(-1);
    expect(last).toMatchObject({ id: requested.body.id, state: 'succeeded', progress: 1 });
    const polled = await study.lead.get(`/v1/analyses/${requested.body.id}`);
    expect(last).toEqual(polled.body);
  });

  it('is listed newest first, and counted as one look each', async () => {
    const listed = await study.analyst.get(`${base}/analyses`);
    const ids: string[] = listed.body.items.map((item: AnalysisState) => item.id);
    expect(ids).toEqual([...ids].sort().reverse());
    const succeeded = listed.body.items.filter((item: AnalysisState) => item.state === 'succeeded');
    const looks = await service.database.sql<{ count: number }[]>`
      select count(*)::int as count from looks
      where study_id = ${study.studyId} and kind = 'analysis'`;
    expect(looks[0]?.count).toBe(succeeded.length);
    expect(succeeded.length).toBeGreaterThanOrEqual(5);
    const verification = await study.auditor.post('/v1/audit/verifications', {});
    expect(verification.body).toMatchObject({ intact: true, faults: [] });
  });

  it('reports an empty study as one without data, not as a failure', async () => {
    const empty = await registerStudy(service);
    const reportId = await filedReport(empty);
    const report = await empty.lead.get(`/v1/reports/${reportId}`);
    expect(report.body.number).toBe(1);
    expect(JSON.stringify(report.body.body.result)).toContain('"estimable":false');
  });

  it('says that enrolment was over when the study was closed before', async () => {
    const closed = await registerStudy(service);
    await uploadTrials(closed, await arrive(closed, 2));
    await closed.lead.post(`/v1/studies/${closed.studyId}/closure`, {});
    const report = await closed.lead.get(`/v1/reports/${await filedReport(closed)}`);
    expect(report.body.body.looks).toEqual([
      { kind: 'analysis', duringEnrolment: false, count: 1 },
    ]);
  });

  it('takes in versions with the same conditions, and says which', async () => {
    const amended = await registerStudy(service);
    await uploadTrials(amended, await arrive(amended, 2));
    await amend(amended, (protocol) => ({ ...protocol, title: 'Two liners, renamed' }));
    await uploadTrials(amended, await arrive(amended, 3));
    const report = await amended.lead.get(`/v1/reports/${await filedReport(amended)}`);
    expect(versionNumbers(report.body.body)).toEqual([1, 2]);
    expect(report.body.body.result.participantFlow.overall.arrived).toBe(5);

    await amend(amended, (protocol) => {
      const [liner] = protocol.withinFactors;
      const levels = [...(liner?.levels ?? []), { key: 'none', label: 'None' }];
      const periods = { ...protocol.periods, count: 3, visits: [[1, 2, 3]] };
      const withinFactors = [{ key: 'liner', label: 'Liner', levels }];
      return { ...protocol, withinFactors, periods };
    });
    await uploadTrials(amended, await arrive(amended, 4));
    const third = await amended.lead.get(`/v1/reports/${await filedReport(amended)}`);
    expect(third.body.protocolVersion).toBe(3);
    expect(versionNumbers(third.body.body)).toEqual([3]);
    expect(third.body.body.result.participantFlow.overall.arrived).toBe(4);
    const looked = await service.database.sql<{ details: object }[]>`
      select content::json->'details' as details from audit_entries
      where chain = ${amended.studyId} and content::json->>'action' = 'looked'
      order by number desc limit 1`;
    expect(looked[0]?.details).toMatchObject({
      kind: 'analysis',
      protocolVersions: [3],
      participantsOfOtherVersions: 5,
    });
  });

  it('finds nothing left to do in the jobs of analyses that were cancelled before', async () => {
    const rows = await service.database.sql<{ id: string; job: string; reports: number }[]>`
      select a.id, j.state::text as job,
        (select count(*)::int from reports r where r.analysis_id = a.id) as reports
      from analyses a join pgboss.job j on j.data->>'subjectId' = a.id::text
      where a.state = 'cancelled'`;
    expect(rows).toHaveLength(3);
    for (const row of rows) expect([row.job, row.reports]).toEqual(['completed', 0]);
  });
});

/** Registers the next version of a study's protocol. */
async function amend(
  study: AnalysedStudy,
  change: (protocol: ReturnType<typeof gloveProtocol>) => object,
): Promise<void> {
  const base = `/v1/studies/${study.studyId}`;
  const draft = await study.lead.put(`${base}/protocol-draft`, {
    revision: 0,
    protocol: change(gloveProtocol(study.siteId)),
  });
  const { revision } = draft.body;
  const reason = 'For the test.';
  const version = await study.lead.post(`${base}/protocol-versions`, { revision, reason });
  expect(version.status).toBe(201);
}

function versionNumbers(body: { snapshot: { protocolVersions: { number: number }[] } }): number[] {
  return body.snapshot.protocolVersions.map(({ number }) => number);
}

/** Paired t of thin against thick, on each participant's mean logarithm of the times. */
function pairedT(trials: readonly UploadedTrial[]): number {
  const meanLogarithm = (participant: string, condition: string): number => {
    const own = trials.filter(
      (trial) => trial.participant === participant && trial.condition === condition,
    );
    return own.reduce((sum, trial) => sum + Math.log(trial.values.time), 0) / own.length;
  };
  const people = [...new Set(trials.map((trial) => trial.participant))];
  const differences = people.map((id) => meanLogarithm(id, 'thin') - meanLogarithm(id, 'thick'));
  const n = differences.length;
  const mean = differences.reduce((sum, difference) => sum + difference, 0) / n;
  const squares = differences.reduce((sum, difference) => sum + (difference - mean) ** 2, 0);
  return mean / Math.sqrt(squares / (n - 1) / n);
}

function eventNames(text: string): string[] {
  return [...text.matchAll(/^event: (\w+)$/gm)].map((match) => match[1] ?? '');
}

function eventData(text: string): unknown[] {
  return [...text.matchAll(/^data: (.+)$/gm)].map((match) => JSON.parse(match[1] ?? ''));
}
