import { setTimeout as pause } from 'node:timers/promises';
import { afterAll, beforeEach, describe, expect, it } from 'vitest';
import { sqlExecutor } from '#platform/database.ts';
import { openQueue } from '#platform/queue.ts';
import { buildApp } from '#server/app.ts';
import {
  type AnalysedStudy,
  type ArrivedParticipant,
  arrive,
  registerStudy,
  uploadTrials,
} from '../support/analysed-study.ts';
import { analysisOnce, hasEnded, startWorker } from '../support/analysis-worker.ts';
import { callerOf, startTestService, type TestService } from '../support/app.ts';

let service: TestService;
let study: AnalysedStudy;
let participants: ArrivedParticipant[];
const services: TestService[] = [];

beforeEach(async () => {
  service = await startTestService();
  services.push(service);
  study = await registerStudy(service);
  participants = await arrive(study, 4);
  await uploadTrials(study, participants);
});

afterAll(async () => {
  for (const one of services) await one.close();
});

/** Holds a lock on a table while `work` runs, so that a worker stops exactly where it writes. */
async function whileLocked<T>(
  table: string,
  mode: 'share row exclusive' | 'access exclusive',
  work: () => Promise<T>,
): Promise<T> {
  const connection = await service.database.sql.reserve();
  try {
    await connection.unsafe(`begin; lock table ${table} in ${mode} mode`);
    return await work();
  } finally {
    await connection.unsafe('rollback');
    connection.release();
  }
}

/** Resolves once so many connections to this database wait for a lock. */
async function waiting(connections: number): Promise<void> {
  for (let tries = 0; tries < 600; tries += 1) {
    const rows = await service.database.sql<{ count: number }[]>`
      select count(*)::int as count from pg_stat_activity
      where datname = current_database() and wait_event_type = 'Lock'`;
    if ((rows[0]?.count ?? 0) >= connections) return;
    await pause(50);
  }
  throw new Error(`No ${connections} connections came to wait for a lock.`);
}

const requestAnalysis = async (): Promise<string> => {
  const answer = await study.lead.post(`/v1/studies/${study.studyId}/analyses`, {});
  expect(answer.status).toBe(202);
  return answer.body.id;
};

const counted = async () => {
  const rows = await service.database.sql<
    { reports: number; snapshots: number; looks: number; filed: number }[]
  >`
    select (select count(*)::int from reports) as reports,
      (select count(*)::int from snapshots) as snapshots,
      (select count(*)::int from looks) as looks,
      (select count(*)::int from audit_entries
       where content::json->>'action' = 'report-filed') as filed`;
  return rows[0];
};

// common practice, no source: at-least-once delivery with a result that is stored exactly once.
describe('a worker that is killed in the middle of a job', () => {
  it('leaves the job to another, which files one report from the same snapshot', async () => {
    const first = await startWorker(service.databaseUrl);
    const id = await whileLocked('reports', 'share row exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      const running = await study.lead.get(`/v1/analyses/${requested}`);
      expect(running.body.state).toBe('running');
      expect(await counted()).toEqual({ reports: 0, snapshots: 1, looks: 1, filed: 0 });
      first.child.kill('SIGKILL');
      await first.ended;
      return requested;
    });
    await startWorker(service.databaseUrl);
    const ended = await analysisOnce(study.lead, id, hasEnded);
    expect(ended).toMatchObject({ state: 'succeeded', progress: 1 });
    expect(await counted()).toEqual({ reports: 1, snapshots: 1, looks: 1, filed: 1 });
    const report = await study.lead.get(`/v1/reports/${ended.reportId}`);
    expect(report.body.number).toBe(1);
  });

  it('leaves the job to another when it had not even frozen the data', async () => {
    const first = await startWorker(service.databaseUrl);
    const id = await whileLocked('snapshots', 'share row exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      first.child.kill('SIGKILL');
      await first.ended;
      return requested;
    });
    await startWorker(service.databaseUrl);
    expect(await analysisOnce(study.lead, id, hasEnded)).toMatchObject({ state: 'succeeded' });
    expect(await counted()).toEqual({ reports: 1, snapshots: 1, looks: 1, filed: 1 });
  });
});

describe('a job that two workers have at the same time', () => {
  it('ends in one report, and both workers are content', async () => {
    await startWorker(service.databaseUrl);
    await startWorker(service.databaseUrl);
    const queue = await openQueue({
      url: service.databaseUrl,
      logger: service.logger,
      supervise: false,
    });
    const id = await whileLocked('participants', 'access exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      await service.database.inSqlTransaction((tx) =>
        queue.enqueue(sqlExecutor(tx), 'run-analysis', requested),
      );
      await waiting(2);
      return requested;
    });
    await queue.stop(0);
    await analysisOnce(study.lead, id, hasEnded);
    const jobs = await jobStates(id);
    expect(jobs).toEqual(['completed', 'completed']);
    expect(await counted()).toEqual({ reports: 1, snapshots: 1, looks: 1, filed: 1 });
  });
});

/** States of the jobs of an analysis, once none is being done. */
async function jobStates(analysisId: string): Promise<string[]> {
  for (let tries = 0; tries < 600; tries += 1) {
    const rows = await service.database.sql<{ state: string }[]>`
      select state::text from pgboss.job where data->>'subjectId' = ${analysisId}`;
    const states = rows.map((row) => row.state);
    if (!states.includes('active') && !states.includes('created')) return states;
    await pause(50);
  }
  throw new Error('A job was never done.');
}

describe('a worker that is told to stop', () => {
  it('finishes the job at hand first', async () => {
    const worker = await startWorker(service.databaseUrl);
    const id = await whileLocked('reports', 'share row exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      worker.child.kill('SIGTERM');
      await worker.line(/worker stopping/);
      return requested;
    });
    expect(await worker.ended).toBe(0);
    const ended = await study.lead.get(`/v1/analyses/${id}`);
    expect(ended.body.state).toBe('succeeded');
  });
});

describe('a service that is restarted while a job runs', () => {
  it('finds the analysis where it is, and then its report', async () => {
    await startWorker(service.databaseUrl);
    const id = await whileLocked('reports', 'share row exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      const { address, stopFollowing } = await followed(requested);
      await service.app.close();
      expect(await stopFollowing).toMatch(/^event: progress/m);
      await expect(fetch(address)).rejects.toThrow();
      return requested;
    });
    const again = await buildApp(service);
    await again.ready();
    try {
      const lead = callerOf(again, study.leadToken);
      const ended = await analysisOnce(lead, id, hasEnded);
      expect(ended.state).toBe('succeeded');
      expect((await lead.get(`/v1/reports/${ended.reportId}`)).status).toBe(200);
    } finally {
      await again.close();
    }
  });
});

/** Listens on a real port and follows an analysis there; the text comes when the stream ends. */
async function followed(analysisId: string) {
  const address = await service.app.listen({ host: '127.0.0.1', port: 0 });
  const stream = await fetch(`${address}/v1/analyses/${analysisId}/events`, {
    headers: { authorization: `Bearer ${study.leadToken}` },
  });
  expect(stream.status).toBe(200);
  return { address, stopFollowing: stream.text() };
}

describe('a running analysis that is cancelled', () => {
  it('stops, files nothing, and counts no look when the data were not read yet', async () => {
    await startWorker(service.databaseUrl);
    const id = await whileLocked('participants', 'access exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      const cancelled = await study.lead.post(`/v1/analyses/${requested}/cancellation`);
      expect(cancelled.body).toMatchObject({ state: 'running', cancelRequested: true });
      const twice = await study.lead.post(`/v1/analyses/${requested}/cancellation`);
      expect(twice.status).toBe(200);
      return requested;
    });
    expect(await analysisOnce(study.lead, id, hasEnded)).toMatchObject({
      state: 'cancelled',
      reportId: null,
    });
    expect(await counted()).toEqual({ reports: 0, snapshots: 0, looks: 0, filed: 0 });
    const rows = await service.database.sql<{ action: string }[]>`
      select content::json->>'action' as action from audit_entries
      where content::json->>'subject' = ${id} order by number`;
    expect(rows.map((row) => row.action)).toEqual([
      'analysis-requested',
      'analysis-cancellation-requested',
      'analysis-cancelled',
    ]);
  });
});

describe('an analysis whose every try breaks', () => {
  it('fails with a message after a bounded number of tries', async () => {
    await service.database.sql`alter table snapshots rename to snapshots_away`;
    await startWorker(service.databaseUrl);
    const id = await requestAnalysis();
    const ended = await analysisOnce(study.lead, id, hasEnded);
    expect(ended.state).toBe('failed');
    expect(ended.failure).toContain('tried several times');
    const events = await study.lead.get(`/v1/analyses/${id}/events`);
    expect(events.text).toContain('event: ended');
    await service.database.sql`alter table snapshots_away rename to snapshots`;
  });
});

describe('an erasure while the data are being frozen', () => {
  it('waits for the freezing and then takes what it stored', async () => {
    const [person] = participants;
    await startWorker(service.databaseUrl);
    const { id, erasure } = await whileLocked('snapshots', 'share row exclusive', async () => {
      const requested = await requestAnalysis();
      await waiting(1);
      const pending = study.lead.post(
        `/v1/studies/${study.studyId}/participants/${person?.code}/erasure`,
        { reasonCode: 'participant-request' },
      );
      await waiting(2);
      return { id: requested, erasure: pending };
    });
    expect((await erasure).status).toBeLessThan(300);
    await analysisOnce(study.lead, id, hasEnded);
    const left = await service.database.sql`
      select 1 from snapshot_participants where participant_id = ${person?.id ?? ''}`;
    expect(left).toHaveLength(0);
    const others = await service.database.sql`select 1 from snapshot_participants`;
    expect(others).toHaveLength(participants.length - 1);
  });
});
