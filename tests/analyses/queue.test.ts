import { pino } from 'pino';
import { afterAll, beforeAll, describe, expect, it } from 'vitest';
import { type Database, openDatabase, recordsExecutor, sqlExecutor } from '#platform/database.ts';
import { uuidv7 } from '#platform/ids.ts';
import { type JobQueue, openQueue, openSenderLater } from '#platform/queue.ts';
import { type ClonedDatabase, cloneDatabase } from '../support/database.ts';

const logger = pino({ level: 'silent' });
let clone: ClonedDatabase;
let database: Database;
const open: { stop(graceMs: number): Promise<void> }[] = [];

beforeAll(async () => {
  clone = await cloneDatabase();
  database = openDatabase({ url: clone.url, poolSize: 4 });
});

afterAll(async () => {
  await Promise.all(open.map((queue) => queue.stop(0)));
  await database.close();
  await clone.drop();
});

async function opened(supervise: boolean): Promise<JobQueue> {
  const queue = await openQueue({ url: clone.url, logger, supervise });
  open.push(queue);
  return queue;
}

async function jobs(subjectId: string): Promise<{ name: string; state: string }[]> {
  return await database.sql<{ name: string; state: string }[]>`
    select name, state::text from pgboss.job where data->>'subjectId' = ${subjectId}
    order by created_on`;
}

// common practice, no source: a job exists exactly when the record it is about was committed.
describe('the job queue', () => {
  it('is made once by several processes that start at the same time', async () => {
    const queues = await Promise.all([opened(true), opened(false), opened(false), opened(true)]);
    expect(queues).toHaveLength(4);
    const rows = await database.sql`select name from pgboss.queue order by name`;
    expect(rows.map((row) => row.name)).toEqual(['analysis-given-up', 'run-analysis']);
  });

  it('has a job exactly when the transaction that added it was committed', async () => {
    const sender = openSenderLater({ url: clone.url, logger });
    open.push(sender);
    const [kept, lost, keptBySql] = [uuidv7(), uuidv7(), uuidv7()];
    await database.inRecordsTransaction(async (tx) => {
      await sender.enqueue(recordsExecutor(tx), 'run-analysis', kept);
      expect(await jobs(kept)).toEqual([]);
    });
    await database.inSqlTransaction((tx) =>
      sender.enqueue(sqlExecutor(tx), 'run-analysis', keptBySql),
    );
    const broken = database.inRecordsTransaction(async (tx) => {
      await sender.enqueue(recordsExecutor(tx), 'run-analysis', lost);
      throw new Error('taken back');
    });
    await expect(broken).rejects.toThrow('taken back');
    expect(await jobs(kept)).toEqual([{ name: 'run-analysis', state: 'created' }]);
    expect(await jobs(keptBySql)).toEqual([{ name: 'run-analysis', state: 'created' }]);
    expect(await jobs(lost)).toEqual([]);
  });

  it('tries a failing job again, a bounded number of times, and then gives it up', async () => {
    await database.sql`delete from pgboss.job`;
    const worker = await opened(true);
    const subject = uuidv7();
    const tries: number[] = [];
    const givenUp = new Promise<string>((resolve) => {
      void worker.work('analysis-given-up', async (job) => resolve(job.subjectId));
    });
    await worker.work('run-analysis', async (job) => {
      tries.push(job.triesBefore);
      throw new Error('broken on purpose');
    });
    await database.inSqlTransaction((tx) =>
      worker.enqueue(sqlExecutor(tx), 'run-analysis', subject),
    );
    expect(await givenUp).toBe(subject);
    expect(tries).toEqual([0, 1, 2, 3]);
  }, 120_000);
});
