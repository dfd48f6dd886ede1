import { readFileSync } from 'node:fs';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { type ClonedDatabase, createEmptyDatabase } from '../support/database.ts';
import { largeRows, largeStudy } from '../support/large-study.ts';
import { startNodeProgram } from '../support/node-program.ts';

const ROWS = 100_000;
const REPETITIONS = 250;
const PERIODS = 4;
const LIMIT_MIB = 256;

let database: ClonedDatabase;

beforeAll(async () => {
  database = await createEmptyDatabase();
});

afterAll(() => database.drop());

/** The most memory that a process has held so far, its program included (Linux, `proc(5)`). */
function highestResidentMib(pid: number): number {
  const status = readFileSync(`/proc/${pid}/status`, 'utf8');
  return Number(/VmHWM:\s+(\d+) kB/.exec(status)?.[1]) / 1024;
}

describe.runIf(process.platform === 'linux')('an upload of 100,000 rows', () => {
  // README promises this bound. It is measured over the whole life of the process, start included.
  it('keeps the whole server within 256 MiB, and is stored', async () => {
    const server = startNodeProgram('server/main.ts', {
      environment: {
        DATABASE_URL: database.url,
        FAIRTURN_PORT: '0',
        FAIRTURN_WORKERS: '0',
        FAIRTURN_LOG_LEVEL: 'error',
      },
    });
    const url = (await server.line(/listens on/)).replace(/.*listens on /, '');
    const token = /fairturn_\S+/.exec(server.output())?.[0] ?? '';
    const count = ROWS / (REPETITIONS * PERIODS);
    const options = { repetitions: REPETITIONS, targetEnrolment: count };
    const study = await largeStudy(url, token, options);
    const rows = [...largeRows(await study.arrive(count), REPETITIONS)];
    expect(rows).toHaveLength(ROWS);
    const body = rows.map((row) => `${JSON.stringify(row)}\n`).join('');
    const answer = await fetch(`${url}/v1/studies/${study.studyId}/uploads`, {
      method: 'POST',
      headers: { ...study.stationHeaders, 'content-type': 'application/x-ndjson' },
      body,
    });
    expect(answer.status).toBe(201);
    expect(await answer.json()).toMatchObject({ rows: ROWS, accepted: ROWS, refused: 0 });
    const peak = highestResidentMib(server.pid);
    expect(peak).toBeGreaterThan(50);
    expect(peak).toBeLessThan(LIMIT_MIB);
  });
});
