import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  type Analysis,
  type AnalysisDetails,
  AnalysisEndedError,
  Fairturn,
  isProblem,
  type Study,
} from '../../client-sdk/src/index.ts';
import { startWorker } from '../support/analysis-worker.ts';
import type { NodeProgram } from '../support/node-program.ts';
import { type FaultyProxy, startFaultyProxy } from './faulty-proxy.ts';
import { createLinerStudy } from './liner-study.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

let service: ListeningService;
let proxy: FaultyProxy;
let study: Study;
let worker: NodeProgram | null = null;

beforeAll(async () => {
  service = await startListeningService();
  proxy = await startFaultyProxy(service.url);
  const liner = await createLinerStudy(service, { name: 'Waiting' });
  const [token] = liner.stationTokens;
  const station = new Fairturn({ url: service.url, token, operator: 'OP-1' });
  await station.study(liner.study.id).arrive({ kind: 'new', stratum: { shift: 'early' } });
  const { token: leadToken } = liner.lead.connection.options;
  const retry = { attempts: 3, pauseMs: 1, pauseMsMax: 2 };
  const lead = new Fairturn({ url: proxy.url, token: leadToken, retry });
  study = lead.study(liner.study.id);
});

beforeEach(() => {
  proxy.faults.length = 0;
  proxy.seen.length = 0;
});

afterAll(async () => {
  worker?.child.kill('SIGTERM');
  await worker?.ended;
  await proxy.close();
  await service.close();
});

function paths(): string[] {
  return proxy.seen.map(({ request }) => request);
}

/** Waits while no worker runs, then lets one take the job. */
async function waited(analysis: Analysis): Promise<[AnalysisDetails, AnalysisDetails[]]> {
  const news: AnalysisDetails[] = [];
  const waiting = analysis.wait({ onProgress: (one) => news.push(one), pollMs: 5 });
  worker ??= await startWorker(service.databaseUrl);
  return [await waiting, news];
}

describe('an analysis that no worker has taken yet', () => {
  it('can be left alone by the caller, who stops waiting at once', async () => {
    const analysis = await study.analyse();
    const stop = new AbortController();
    const waiting = analysis.wait({
      signal: stop.signal,
      onProgress: () => stop.abort(new Error('Enough.')),
    });
    await expect(waiting).rejects.toThrow('Enough.');
    expect((await analysis.details()).state).toBe('queued');
  });

  it('can be cancelled, which whoever waits for it learns', async () => {
    const analysis = await study.analyse();
    const waiting = analysis.wait().catch((caught: unknown) => caught);
    await analysis.cancel();
    const ended = await waiting;
    expect(ended).toBeInstanceOf(AnalysisEndedError);
    expect((ended as AnalysisEndedError).analysis.state).toBe('cancelled');
    const again = await analysis.cancel().catch((caught: unknown) => caught);
    expect(isProblem(again, 'analysis-finished')).toBe(true);
  });
});

describe('waiting for an analysis', () => {
  it('follows its events, from the queue to the report', async () => {
    const analysis = await study.analyse({ seed: '00112233445566778899aabbccddeeff' });
    const [details, news] = await waited(analysis);
    expect(details).toMatchObject({ state: 'succeeded', progress: 1 });
    expect(details.seed).toBe('00112233445566778899aabbccddeeff');
    const progress = news.map((one) => one.progress);
    expect(progress).toEqual([...progress].sort((a, b) => a - b));
    expect(news.at(-1)).toEqual(details);
    expect(paths().filter((path) => path.endsWith('/events'))).toHaveLength(1);
    expect(paths()).not.toContain(`GET /v1/analyses/${analysis.id}`);
  });

  it('asks again and again where the events cannot be had', async () => {
    const analysis = await study.analyse();
    // Each attempt at the stream is refused three times, as a proxy without streams might.
    const refused = { status: 502 } as const;
    proxy.faults.push(refused, refused, refused);
    const [details] = await waited(analysis);
    expect(details.state).toBe('succeeded');
    expect(paths()).toContain(`GET /v1/analyses/${analysis.id}`);
  });

  it('survives a stream that breaks in the middle', async () => {
    const analysis = await study.analyse();
    proxy.faults.push('cut-within');
    const [details] = await waited(analysis);
    expect(details.state).toBe('succeeded');
  });

  it('ends at once for an analysis that the token cannot see', async () => {
    const stranger = new Fairturn({ url: proxy.url, token: service.administratorToken });
    const analysis = stranger.analysis('0190a000-0000-7000-8000-000000000000');
    const refusal = await analysis.wait().catch((caught: unknown) => caught);
    expect(isProblem(refusal, 'not-found', 'not-permitted')).toBe(true);
  });
});

describe('a report', () => {
  it('is numbered, immutable, and the same when computed again', async () => {
    const report = await (await study.analyse()).report();
    const details = await report.details();
    const body = await report.body();
    const digest = await crypto.subtle.digest('SHA-256', Uint8Array.from(body));
    expect(Buffer.from(digest).toString('hex')).toBe(details.sha256);
    expect(JSON.parse(new TextDecoder().decode(body))).toEqual(details.body);
    expect(await report.html()).toMatch(/^<!doctype html>/i);
    expect(await report.recompute()).toMatchObject({ same: true, pageSame: true });
    const listed = await study.reports().all();
    expect(listed.map(({ id }) => id)).toContain(report.id);
    const states = (await study.analyses().all()).map(({ state }) => state);
    expect(states.filter((state) => state === 'succeeded')).toHaveLength(listed.length);
  });
});
