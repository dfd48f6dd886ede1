import { appendFileSync, readFileSync, statSync, truncateSync, writeFileSync } from 'node:fs';
import path from 'node:path';
import { afterAll, beforeAll, beforeEach, describe, expect, it } from 'vitest';
import {
  Fairturn,
  memoryStore,
  NetworkError,
  Outbox,
  type OutboxStorage,
  outboxIn,
} from '../../client-sdk/src/index.ts';
import {
  FolderLockedError,
  OutboxDamagedError,
  openFileOutbox,
  openFileStore,
} from '../../client-sdk/src/node.ts';
import { startNodeProgram } from '../support/node-program.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';
import { type FaultyProxy, startFaultyProxy } from './faulty-proxy.ts';
import { type ListeningService, startListeningService } from './listening-service.ts';

const STATION = path.join(import.meta.dirname, 'station-process.ts');

let service: ListeningService;
let proxy: FaultyProxy;
let fairturn: Fairturn;
let run = 0;

beforeAll(async () => {
  service = await startListeningService();
  proxy = await startFaultyProxy(service.url);
});

beforeEach(() => {
  run += 1;
  proxy.down = false;
  proxy.faults.length = 0;
  proxy.seen.length = 0;
  const retry = { attempts: 2, pauseMs: 1, pauseMsMax: 2 };
  fairturn = new Fairturn({ url: proxy.url, token: service.administratorToken, retry });
});

afterAll(async () => {
  await proxy.close();
  await service.close();
});

const lab = (name: string) => ({ path: '/v1/labs', body: JSON.stringify({ name }) });

/** Names of the labs that begin so, in the order in which the service made them. */
async function labsOf(prefix: string): Promise<string[]> {
  const all = await service.administrator.labs.list().all();
  return all.map(({ name }) => name).filter((name) => name.startsWith(prefix));
}

const storages: [string, () => Promise<() => Promise<OutboxStorage>>][] = [
  [
    'a folder',
    async () => {
      const folder = temporaryFolder();
      return () => openFileOutbox(folder);
    },
  ],
  [
    'a key-value store on the disk',
    async () => {
      const store = await openFileStore(temporaryFolder());
      return async () => outboxIn(store);
    },
  ],
  [
    'memory',
    async () => {
      const store = memoryStore();
      return async () => outboxIn(store);
    },
  ],
];

describe.each(storages)('an outbox in %s', (_where, prepare) => {
  it('keeps what could not be sent and sends it later, once and in order', async () => {
    const open = await prepare();
    proxy.down = true;
    const before = await Outbox.open({ fairturn, storage: await open() });
    for (const name of ['a', 'b', 'c', 'd']) await before.add(lab(`${run}-${name}`));
    const failed = await before.flush();
    expect(failed).toMatchObject({ sent: 0, setAside: 0, waiting: 4 });
    expect(failed.stoppedBy).toBeInstanceOf(NetworkError);
    await before.close();

    proxy.down = false;
    proxy.faults.push('cut-after', 'cut-after', 'cut-within', 'cut-before');
    const after = await Outbox.open({ fairturn, storage: await open() });
    expect(after.waiting.map(({ body }) => JSON.parse(body).name)).toEqual(
      ['a', 'b', 'c', 'd'].map((name) => `${run}-${name}`),
    );
    while (after.waiting.length > 0) await after.flush();
    expect(after.setAside).toEqual([]);
    expect(await labsOf(`${run}-`)).toEqual(['a', 'b', 'c', 'd'].map((name) => `${run}-${name}`));
    expect(new Set(proxy.seen.map(({ key }) => key)).size).toBe(4);
    await after.close();
    const empty = await Outbox.open({ fairturn, storage: await open() });
    expect(empty.waiting).toEqual([]);
    await empty.close();
  });

  it('sets a refused item aside with its problem and goes on with those behind it', async () => {
    const open = await prepare();
    const sent: string[] = [];
    const outbox = await Outbox.open({
      fairturn,
      storage: await open(),
      onSent: (item) => sent.push(item.body),
    });
    await outbox.add(lab(`${run}-first`));
    const refused = await outbox.add(lab(''));
    await outbox.add(lab(`${run}-second`));
    expect(await outbox.flush()).toEqual({ sent: 2, setAside: 1, waiting: 0, stoppedBy: null });
    expect(sent).toHaveLength(2);
    await outbox.close();

    const reopened = await Outbox.open({ fairturn, storage: await open() });
    expect(reopened.setAside).toMatchObject([
      { number: refused.number, problem: { type: '/problems/invalid-request', status: 400 } },
    ]);
    const again = await reopened.sendAgain(refused.number);
    expect(again.key).not.toBe(refused.key);
    await reopened.flush();
    expect(reopened.setAside.map(({ number }) => number)).toEqual([again.number]);
    await reopened.discard(again.number);
    expect(reopened.setAside).toEqual([]);
    expect(await labsOf(`${run}-`)).toEqual([`${run}-first`, `${run}-second`]);
    await reopened.close();
  });
});

describe('what is not the fault of an item', () => {
  it('does not set it aside: a token that is not valid, a service that cannot now', async () => {
    const stranger = new Fairturn({ url: proxy.url, token: 'none' });
    const storage = outboxIn(memoryStore());
    const first = await Outbox.open({ fairturn: stranger, storage });
    await first.add(lab(`${run}-kept`));
    expect((await first.flush()).stoppedBy).toMatchObject({ type: 'not-authenticated' });
    const second = await Outbox.open({ fairturn, storage });
    proxy.faults.push({ status: 503 }, { status: 503 });
    expect((await second.flush()).waiting).toBe(1);
    expect(await second.flush()).toMatchObject({ sent: 1, stoppedBy: null });
  });
});

describe('the file of an outbox', () => {
  async function writtenOutbox(names: readonly string[]): Promise<string> {
    const folder = temporaryFolder();
    const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
    for (const name of names) await outbox.add(lab(name));
    await outbox.close();
    return folder;
  }

  async function waitingIn(folder: string): Promise<string[]> {
    const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
    const names = outbox.waiting.map(({ body }) => JSON.parse(body).name);
    await outbox.close();
    return names;
  }

  // common practice, no source: a write-ahead file cut at any byte loses only its last, torn line
  it('gives back every whole line when it was cut at any byte of the last', async () => {
    const folder = await writtenOutbox(['a', 'b', 'c']);
    const file = path.join(folder, 'outbox.log');
    const whole = readFileSync(file);
    const lastLine = whole.lastIndexOf(10, whole.length - 2) + 1;
    for (let length = lastLine; length < whole.length - 1; length += 1) {
      writeFileSync(file, whole.subarray(0, length));
      expect(await waitingIn(folder)).toEqual(['a', 'b']);
    }
    writeFileSync(file, whole);
    expect(await waitingIn(folder)).toEqual(['a', 'b', 'c']);
    appendFileSync(file, Buffer.alloc(512));
    expect(await waitingIn(folder)).toEqual(['a', 'b', 'c']);
  });

  it('can be written to again after a torn line', async () => {
    const folder = await writtenOutbox(['a', 'b']);
    const file = path.join(folder, 'outbox.log');
    truncateSync(file, statSync(file).size - 10);
    const outbox = await Outbox.open({ fairturn, storage: await openFileOutbox(folder) });
    await outbox.add(lab('c'));
    await outbox.close();
    expect(await waitingIn(folder)).toEqual(['a', 'c']);
  });

  it('is refused, naming the line, when a line was changed later', async () => {
    const folder = await writtenOutbox(['a', 'b', 'c']);
    const file = path.join(folder, 'outbox.log');
    writeFileSync(file, readFileSync(file, 'utf8').replace('\\"b\\"', '\\"x\\"'));
    await expect(openFileOutbox(folder)).rejects.toThrow(OutboxDamagedError);
    await expect(openFileOutbox(folder)).rejects.toThrow('Line 2 of');
  });

  it('is open in one process only', async () => {
    const folder = temporaryFolder();
    const storage = await openFileOutbox(folder);
    await expect(openFileOutbox(folder)).rejects.toThrow(FolderLockedError);
    const rival = startNodeProgram(STATION, { args: [proxy.url, 'none', folder] });
    expect(await rival.ended).not.toBe(0);
    expect(rival.output()).toContain('FolderLockedError');
    await storage.close();
    await (await openFileOutbox(folder)).close();
  });
});

describe('a station that is killed at any moment', () => {
  it('sends after its restart what it had written down, once and in order', async () => {
    const folder = temporaryFolder();
    const total = 24;
    let next = 1;
    for (const [until, fault] of [
      [6, 'cut-after'],
      [12, 'cut-before'],
      [18, 'cut-within'],
    ] as const) {
      // The last requests before the kill get no answer, so the station cannot know what was done.
      const station = startNodeProgram(STATION, {
        args: [proxy.url, service.administratorToken, folder, String(next), '1000'],
      });
      await station.line(new RegExp(`^written ${until - 2}$`));
      proxy.faults.push(fault, fault, fault, fault, fault, fault);
      await station.line(new RegExp(`^written ${until}$`));
      process.kill(station.pid, 'SIGKILL');
      expect(await station.ended).toBe('SIGKILL');
      const written = [...station.output().matchAll(/^written (\d+)$/gm)].map(([, n]) => Number(n));
      next = Math.max(...written) + 1;
      // What was being written at the moment of the kill may be there or not: both are right.
      proxy.faults.length = 0;
    }
    const station = startNodeProgram(STATION, {
      args: [
        proxy.url,
        service.administratorToken,
        folder,
        String(Math.max(next + 1, total)),
        '40',
      ],
    });
    expect(await station.ended).toBe(0);
    const made = (await labsOf('Lab ')).map((name) => Number(name.slice(4)));
    // Whatever was acknowledged to the station is there, nothing twice, nothing out of order.
    expect(made).toEqual([...new Set(made)].sort((a, b) => a - b));
    expect(station.output()).toContain('0 waiting');
    for (let number = 1; number < next; number += 1) expect(made).toContain(number);
  });
});
