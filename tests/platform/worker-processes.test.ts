import { existsSync, readFileSync, writeFileSync } from 'node:fs';
import { join } from 'node:path';
import { PassThrough } from 'node:stream';
import { expect, test } from 'vitest';
import { processBirth } from '#platform/folder-lock.ts';
import { createLogger } from '#platform/logging.ts';
import { startWorkerProcesses } from '#platform/worker-processes.ts';
import { temporaryFolder } from '../support/temporary-folder.ts';

/** A program that notes its process id and database, and ends as its text says. */
function program(folder: string, ending: string): string {
  const file = join(folder, 'worker.mjs');
  writeFileSync(
    file,
    `import { appendFileSync } from 'node:fs';
     appendFileSync(${JSON.stringify(join(folder, 'started'))},
       process.pid + ' ' + process.env.DATABASE_URL + '\\n');
     ${ending}`,
  );
  return file;
}

function starts(folder: string): { pid: number; databaseUrl: string }[] {
  const file = join(folder, 'started');
  const text = existsSync(file) ? readFileSync(file, 'utf8').trim() : '';
  return text === ''
    ? []
    : text.split('\n').map((line) => {
        const [pid, databaseUrl = ''] = line.split(' ');
        return { pid: Number(pid), databaseUrl };
      });
}

async function until(holds: () => boolean): Promise<void> {
  while (!holds()) await new Promise((settle) => setTimeout(settle, 10));
}

const databaseUrl = 'postgresql://a:b@db.invalid/fairturn';

function quietLogger() {
  return createLogger({ level: 'info', destination: new PassThrough().resume() });
}

test('as many workers run as asked for, each knows the database, and all are stopped', async () => {
  const folder = temporaryFolder();
  const workers = startWorkerProcesses({
    count: 2,
    databaseUrl,
    logger: quietLogger(),
    program: program(folder, 'setInterval(() => undefined, 60_000);'),
  });
  await until(() => starts(folder).length === 2);
  expect(starts(folder).map((start) => start.databaseUrl)).toEqual([databaseUrl, databaseUrl]);
  await workers.stop(30);
  for (const { pid } of starts(folder)) expect(processBirth(pid)).toBeNull();
});

test('a crashed worker is started again; after the stop none is', async () => {
  const folder = temporaryFolder();
  const workers = startWorkerProcesses({
    count: 1,
    databaseUrl,
    logger: quietLogger(),
    program: program(folder, 'process.exit(3);'),
  });
  await until(() => starts(folder).length === 2);
  await workers.stop(30);
  const startsAtStop = starts(folder).length;
  // Longer than any pause that could have been under way (0.5 s, then 1 s).
  await new Promise((settle) => setTimeout(settle, 1500));
  expect(starts(folder)).toHaveLength(startsAtStop);
});

test('a worker that does not heed SIGTERM is killed in the end', async () => {
  const folder = temporaryFolder();
  const workers = startWorkerProcesses({
    count: 1,
    databaseUrl,
    logger: quietLogger(),
    program: program(
      folder,
      `process.on('SIGTERM', () => appendFileSync(${JSON.stringify(join(folder, 'asked'))}, 'x'));
       setInterval(() => undefined, 60_000);
       appendFileSync(${JSON.stringify(join(folder, 'deaf'))}, 'x');`,
    ),
  });
  await until(() => existsSync(join(folder, 'deaf')));
  await workers.stop(0.5);
  expect(existsSync(join(folder, 'asked'))).toBe(true);
  for (const { pid } of starts(folder)) expect(processBirth(pid)).toBeNull();
});
