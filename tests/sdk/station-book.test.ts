import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  Fairturn,
  isProblem,
  NetworkError,
  NotInBookError,
  Outbox,
  StationBook,
} from '../../client-sdk/src/index.ts';
import { openFileOutbox, openFileStore } from '../../client-sdk/src/node.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';
import { type FaultyProxy, type LinkFault, startFaultyProxy } from './faulty-proxy.ts';
import { createLinerStudy, type LinerStudy } from './liner-study.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const HALF_HOUR_MS = 30 * 60_000;
const EARLY = { shift: 'early' };

let service: ListeningService;
let proxy: FaultyProxy;
let rested: LinerStudy;
let restless: LinerStudy;

beforeAll(async () => {
  service = await startListeningService();
  proxy = await startFaultyProxy(service.url);
  const washout = { minimum: 'PT30M', maximum: 'PT2H' };
  rested = await createLinerStudy(service, { name: 'Rested', washout });
  const none = { minimum: 'PT0S', maximum: null };
  restless = await createLinerStudy(service, { name: 'Restless', washout: none });
});

beforeEach(() => {
  proxy.down = false;
  proxy.faults.length = 0;
  proxy.seen.length = 0;
});

afterAll(async () => {
  await proxy.close();
  await service.close();
});

interface OpenStation {
  readonly fairturn: Fairturn;
  readonly outbox: Outbox;
  readonly book: StationBook;
}

/** The software of one station, as it is after each start on the same folder. */
async function openStation(liner: LinerStudy, folder: string): Promise<OpenStation> {
  const fairturn = new Fairturn({
    url: proxy.url,
    token: liner.stationTokens[0],
    operator: 'OP-1',
    retry: { attempts: 2, pauseMs: 1, pauseMsMax: 2 },
  });
  const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
  const store = await openFileStore(`${folder}/book`);
  const book = new StationBook({ study: fairturn.study(liner.study.id), outbox, store });
  return { fairturn, outbox, book };
}

describe('arrivals over a bad link', () => {
  // The service gives codes here, so every arrival done twice would be a participant too many.
  it('are done once however the link fails, which the number of participants proves', async () => {
    const station = new Fairturn({
      url: proxy.url,
      token: restless.stationTokens[0],
      operator: 'OP-1',
      retry: { attempts: 8, pauseMs: 1, pauseMsMax: 2 },
    });
    const codes: string[] = [];
    for (const faults of [
      [],
      ['cut-after'],
      ['cut-before', 'cut-after', 'cut-after'],
      ['cut-within'],
      [{ status: 503 }, 'cut-after', { status: 429, headers: { 'retry-after': '0' } }],
      ['cut-after', 'cut-within', 'cut-before', { status: 503 }, 'cut-after', 'cut-within'],
    ] satisfies LinkFault[][]) {
      proxy.faults.push(...faults);
      const arrival = await station
        .study(restless.study.id)
        .arrive({ kind: 'new', stratum: EARLY });
      codes.push(arrival.participant.code);
    }
    const kept = await restless.study.participants().all();
    expect(kept.map(({ code }) => code)).toEqual(codes);
    expect(kept.map(({ slotNumber }) => slotNumber)).toEqual([1, 2, 3, 4, 5, 6]);
    expect(new Set(proxy.seen.map(({ key }) => key)).size).toBe(6);
  });

  it('that wait in the outbox are done once after a restart', async () => {
    const folder = temporaryFolder();
    const before = (await restless.study.participants().all()).length;
    const first = await openStation(restless, folder);
    proxy.down = true;
    const path = `/v1/studies/${restless.study.id}/arrivals`;
    const body = JSON.stringify({ kind: 'new', stratum: EARLY });
    for (let count = 0; count < 3; count += 1) await first.outbox.add({ path, body });
    await first.outbox.flush();
    await first.outbox.close();
    proxy.down = false;
    const second = await openStation(restless, folder);
    proxy.faults.push('cut-after', 'cut-after', 'cut-after');
    while (second.outbox.waiting.length > 0) await second.outbox.flush();
    expect(second.outbox.setAside).toEqual([]);
    expect(await restless.study.participants().all()).toHaveLength(before + 3);
    await second.outbox.close();
  });

  it('of somebody new are not possible without the link', async () => {
    const { outbox, book } = await openStation(restless, temporaryFolder());
    proxy.down = true;
    await expect(book.arrive({ kind: 'new', stratum: EARLY })).rejects.toThrow(NetworkError);
    await expect(book.due('P-404')).rejects.toThrow(NotInBookError);
    await outbox.close();
  });
});

describe('what is due while the link is down', () => {
  it('is what the service said, and after a start the washout of the next period', async () => {
    const folder = temporaryFolder();
    const first = await openStation(rested, folder);
    const arrival = await first.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = arrival.participant;
    const online = await first.book.due(code);
    expect(online).toMatchObject({ state: 'due', period: 1, source: 'service' });

    proxy.down = true;
    const { judgedAt: _then, source: _service, ...saidByService } = online;
    expect(await first.book.due(code)).toMatchObject({ ...saidByService, source: 'station' });
    expect(await first.book.startPeriod(code, { period: 1 })).toBe('queued');
    await first.outbox.close();

    // The station starts anew, still without a link, and is asked in another case of the code.
    const second = await openStation(rested, folder);
    const offline = await second.book.due(code.toLowerCase());
    expect(offline).toMatchObject({ state: 'too-early', period: 2, source: 'station' });
    expect(offline.condition).toEqual(arrival.periods[1]?.condition);

    // With the link back, the service gets the start with the time at which it was, and agrees.
    proxy.down = false;
    const agreed = await second.book.due(code);
    expect(second.outbox.setAside).toEqual([]);
    expect(agreed).toMatchObject({ state: 'too-early', period: 2, source: 'service' });
    const { judgedAt: _now, source: _station, ...saidByStation } = offline;
    expect(agreed).toMatchObject(saidByStation);
    const started = (await rested.study.participant(code)).periods[0]?.startedAt ?? '';
    expect(Date.parse(agreed.dueFrom ?? '')).toBe(Date.parse(started) + HALF_HOUR_MS);
    await second.outbox.close();
  });

  it('goes on to the end, and everything arrives in order once the link is back', async () => {
    const station = await openStation(restless, temporaryFolder());
    const { participant } = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = participant;
    proxy.down = true;
    for (let period = 1; period <= 4; period += 1) {
      expect(await station.book.due(code)).toMatchObject({ state: 'due', period });
      expect(await station.book.startPeriod(code, { period })).toBe('queued');
    }
    expect(await station.book.due(code)).toMatchObject({ state: 'finished', period: null });
    proxy.down = false;
    expect(await station.outbox.flush()).toEqual({
      sent: 4,
      setAside: 0,
      waiting: 0,
      stoppedBy: null,
    });
    const { periods } = await restless.study.participant(code);
    const times = periods.map(({ startedAt }) => Date.parse(startedAt ?? ''));
    expect(times).toEqual([...times].sort((a, b) => a - b));
    expect(times).not.toContain(Number.NaN);
    expect(await station.book.due(code)).toMatchObject({ state: 'finished', source: 'service' });
    await station.outbox.close();
  });
});

describe('what the service refuses', () => {
  it('reaches the caller at once, and leaves neither book nor outbox changed', async () => {
    const station = await openStation(rested, temporaryFolder());
    const { participant } = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = participant;
    await station.book.startPeriod(code, { period: 1 });
    const refusal = await station.book
      .startPeriod(code, { period: 2 })
      .catch((caught: unknown) => caught);
    expect(isProblem(refusal, 'period-not-due')).toBe(true);
    expect(station.outbox.waiting).toEqual([]);
    expect(station.outbox.setAside).toEqual([]);
    proxy.down = true;
    expect(await station.book.due(code)).toMatchObject({ state: 'too-early', period: 2 });
    await station.outbox.close();
  });

  it('is refused by the station itself without the link, unless it is a deviation', async () => {
    const station = await openStation(restless, temporaryFolder());
    const { participant } = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = participant;
    proxy.down = true;
    const refusal = await station.book
      .startPeriod(code, { period: 3 })
      .catch((caught: unknown) => caught);
    expect(isProblem(refusal, 'period-not-due')).toBe(true);
    const deviation = { reason: 'The station of period 1 is broken.' };
    expect(await station.book.startPeriod(code, { period: 3, deviation })).toBe('queued');
    proxy.down = false;
    expect(await station.outbox.flush()).toMatchObject({ sent: 1, setAside: 0 });
    const { periods } = await restless.study.participant(code);
    expect(periods).toMatchObject([{ period: 3, deviations: ['out-of-turn'] }]);
    await station.outbox.close();
  });

  it('after the fact is set aside and does not hold up what is behind it', async () => {
    const station = await openStation(restless, temporaryFolder());
    const { participant } = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const next = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = participant;
    proxy.down = true;
    await station.book.startPeriod(code, { period: 1 });
    await station.book.startPeriod(next.participant.code, { period: 1 });
    // Meanwhile the participant is started at the other station of the site, whose link is up.
    const [, token] = restless.stationTokens;
    const other = new Fairturn({ url: service.url, token, operator: 'OP-2' });
    await other.study(restless.study.id).startPeriod(code, { period: 1 });
    proxy.down = false;
    expect(await station.outbox.flush()).toMatchObject({ sent: 1, setAside: 1, waiting: 0 });
    expect(station.outbox.setAside[0]?.problem?.type).toBe('/problems/period-already-started');
    await station.outbox.close();
  });
});

describe('a withdrawal', () => {
  it('ends what is due, online and offline, and the book forgets on request', async () => {
    const station = await openStation(restless, temporaryFolder());
    const { participant } = await station.book.arrive({ kind: 'new', stratum: EARLY });
    const { code } = participant;
    proxy.down = true;
    const stop = { reasonCode: 'unwell', periodReached: 0 } as const;
    expect(await station.book.withdraw(code, stop)).toBe('queued');
    expect((await station.book.due(code)).state).toBe('finished');
    proxy.down = false;
    await station.outbox.flush();
    const { ending } = await restless.study.participant(code);
    expect(ending).toMatchObject({ kind: 'withdrawn', reasonCode: 'unwell' });
    expect(await station.book.participants()).toHaveLength(1);
    await station.book.forget(code);
    expect(await station.book.participants()).toEqual([]);
    await station.outbox.close();
  });
});
