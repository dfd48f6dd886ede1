import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  Fairturn,
  isProblem,
  NetworkError,
  type RetryPolicy,
  UnreadableAnswerError,
} from '../../client-sdk/src/index.ts';
import { DEFAULT_RETRY, pauseAfter, retryAfterMs } from '../../client-sdk/src/retry.ts';
import { type FaultyProxy, type LinkFault, startFaultyProxy } from './faulty-proxy.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const QUICK: Partial<RetryPolicy> = { pauseMs: 1, pauseMsMax: 5 };

let service: ListeningService;
let proxy: FaultyProxy;
let fairturn: Fairturn;

beforeAll(async () => {
  service = await startListeningService();
  proxy = await startFaultyProxy(service.url);
});

beforeEach(() => {
  proxy.faults.length = 0;
  proxy.seen.length = 0;
  proxy.down = false;
  fairturn = new Fairturn({ url: proxy.url, token: service.administratorToken, retry: QUICK });
});

afterAll(async () => {
  await proxy.close();
  await service.close();
});

describe('pauses between tries', () => {
  it('double up to a bound and are drawn from nothing to all of it', () => {
    const policy = { ...DEFAULT_RETRY, pauseMs: 100, pauseMsMax: 1000 };
    expect([1, 2, 3, 4, 5, 6].map((attempt) => pauseAfter(policy, attempt, 0.5))).toEqual([
      50, 100, 200, 400, 500, 500,
    ]);
    expect(pauseAfter(policy, 9, 0)).toBe(0);
  });

  // published: RFC 9110 §10.2.3, its two examples of Retry-After
  it('are what Retry-After asks for, in seconds or until a date', () => {
    const now = Date.parse('1999-12-31T23:58:59Z');
    expect(retryAfterMs('Fri, 31 Dec 1999 23:59:59 GMT', now)).toBe(60_000);
    expect(retryAfterMs('120', now)).toBe(120_000);
    expect(retryAfterMs('Fri, 31 Dec 1999 23:00:00 GMT', now)).toBe(0);
    expect(retryAfterMs('soon', now)).toBeNull();
    expect(retryAfterMs(null, now)).toBeNull();
  });
});

describe('a request over a bad link', () => {
  const cases: [string, LinkFault[]][] = [
    ['was cut before the service saw it', ['cut-before', 'cut-before']],
    ['was cut after the service had answered', ['cut-after', 'cut-after']],
    ['was cut within the answer', ['cut-within']],
    ['met a proxy that cannot reach the service', [{ status: 502 }, { status: 504 }]],
    ['came too early', [{ status: 503 }, { status: 429, headers: { 'retry-after': '0' } }]],
    ['met all of it', ['cut-after', { status: 503 }, 'cut-within', 'cut-before']],
  ];

  it.each(cases)('that %s is repeated and done once', async (_what, faults) => {
    const before = (await service.administrator.audit.checkpoints().all()).length;
    proxy.faults.push(...faults);
    const made = await fairturn.audit.checkpoint();
    const kept = await service.administrator.audit.checkpoints().all();
    expect(kept.length).toBe(before + 1);
    expect(kept.at(-1)).toEqual(made);
    expect(proxy.seen).toHaveLength(faults.length + 1);
    expect(new Set(proxy.seen.map(({ key }) => key)).size).toBe(1);
    expect(proxy.seen[0]?.key).toBeDefined();
  });

  it('uses another key for another request', async () => {
    await fairturn.audit.checkpoint();
    await fairturn.audit.checkpoint();
    expect(new Set(proxy.seen.map(({ key }) => key)).size).toBe(2);
  });

  it('is given up after the tries of the policy, naming them', async () => {
    proxy.down = true;
    const error = await fairturn.labs
      .list()
      .all()
      .catch((caught: unknown) => caught);
    expect(error).toBeInstanceOf(NetworkError);
    expect((error as NetworkError).attempts).toBe(DEFAULT_RETRY.attempts);
  });

  it('is not repeated before the time that Retry-After names', async () => {
    proxy.faults.push({ status: 429, headers: { 'retry-after': '1' } });
    const begun = performance.now();
    await fairturn.tokens.own();
    expect(performance.now() - begun).toBeGreaterThanOrEqual(990);
    // Longer than the client is willing to wait: the answer is handed on.
    proxy.faults.push({ status: 503, headers: { 'retry-after': '86400' } });
    await expect(fairturn.tokens.own()).rejects.toBeInstanceOf(UnreadableAnswerError);
  });

  it('is not repeated when the service refuses it', async () => {
    const error = await fairturn.sites
      .create({ labId: '0190a000-0000-7000-8000-000000000000', name: 'Nowhere' })
      .catch((caught: unknown) => caught);
    expect(isProblem(error, 'not-found')).toBe(true);
    expect(proxy.seen).toHaveLength(1);
  });

  it('ends when a try takes longer than it may', async () => {
    const impatient = new Fairturn({
      url: proxy.url,
      token: service.administratorToken,
      retry: { ...QUICK, attempts: 2 },
      timeoutMs: 20,
      fetch: (_url, init) =>
        new Promise((_answer, fail) => {
          init.signal?.addEventListener('abort', () => fail(init.signal?.reason));
        }),
    });
    const error = await impatient.tokens.own().catch((caught: unknown) => caught);
    expect(error).toBeInstanceOf(NetworkError);
    expect(String((error as NetworkError).cause)).toContain('20 ms');
  });
});

describe('refusals', () => {
  it('carry type, status and a fault for each thing that is wrong', async () => {
    const error = await fairturn.labs.create({ name: '' }).catch((caught: unknown) => caught);
    if (!isProblem(error, 'invalid-request')) throw error;
    expect(error.type).toBe('invalid-request');
    expect(error.status).toBe(400);
    expect(error.faults.map(({ pointer }) => pointer)).toEqual(['/name']);
    expect(isProblem(error, 'not-found')).toBe(false);
    expect(isProblem(error, 'not-found', 'invalid-request')).toBe(true);
  });

  it('of a token are told apart', async () => {
    const stranger = new Fairturn({ url: service.url, token: 'none' });
    const error = await stranger.tokens.own().catch((caught: unknown) => caught);
    expect(isProblem(error, 'not-authenticated')).toBe(true);
  });
});

describe('lists', () => {
  it('are walked over all their pages, each item once and in order', async () => {
    const names: string[] = [];
    for (let number = 1; number <= 203; number += 1) {
      names.push((await service.administrator.labs.create({ name: `Lab ${number}` })).name);
    }
    const walked: string[] = [];
    for await (const lab of fairturn.labs.list()) walked.push(lab.name);
    expect(walked).toEqual(names);
    expect(proxy.seen).toHaveLength(2);
  });
});
