import { PgBoss } from 'pg-boss';
import type { Logger } from 'pino';
import type { Executor, SqlValue } from './database.ts';

/** The PostgreSQL schema that the queue keeps its tables in, beside ours. */
const QUEUE_SCHEMA = 'pgboss';

/**
 * A worker tells every 4 s that it still holds its job. A job whose worker stayed silent for 15 s
 * is given to another by the next supervision, at most 5 s later: a killed worker costs under half
 * a minute.
 */
const HEARTBEAT_SECONDS = 15;
const HEARTBEAT_REFRESH_SECONDS = 4;
const SUPERVISION_SECONDS = 5;

/** No analysis takes longer; one that does has hung, and is stopped and tried again. */
const JOB_SECONDS_MAX = 6 * 3600;

/** New jobs come by notification; polling finds those to be tried again, which are silent. */
const POLLING_SECONDS = 2;

/** Times a job is tried again after a crash or a fault before it is given up. */
const RETRIES = 3;

/**
 * Every queue of the service. Jobs that ran out of tries go to the queue named as `givenUp`, where
 * a worker records the failure, so that a job can end in silence only when no worker is left.
 */
const QUEUES = {
  'run-analysis': { givenUp: 'analysis-given-up' },
  'analysis-given-up': { givenUp: null },
} as const;

export type QueueName = keyof typeof QUEUES;

/** A job as a worker takes it. Jobs carry the id of a record and nothing else. */
export interface TakenJob {
  readonly subjectId: string;
  /** Aborted when the job no longer belongs to this worker, or the worker must stop. */
  readonly signal: AbortSignal;
  /** Tries that went before this one. */
  readonly triesBefore: number;
}

/** What a process that only adds jobs needs. */
export interface JobSender {
  /** Adds a job in the transaction of the record it is about: both are there, or neither. */
  enqueue(executor: Executor, queue: QueueName, subjectId: string): Promise<void>;
  /** Lets jobs at hand finish for `graceMs`, then hands them back and closes. */
  stop(graceMs: number): Promise<void>;
}

export interface JobQueue extends JobSender {
  /** Takes jobs one at a time; a handler that throws has its job tried again, by any worker. */
  work(queue: QueueName, handler: (job: TakenJob) => Promise<void>): Promise<void>;
}

interface JobData {
  readonly subjectId: string;
}

/**
 * Opens the job queue, and makes or updates its tables first. Several processes may do so at once:
 * pg-boss installs under an advisory lock of its own.
 *
 * @param options.supervise whether this process returns the jobs of silent workers to the queue;
 *   workers do, processes that only enqueue do not
 */
export async function openQueue(options: {
  readonly url: string;
  readonly logger: Logger;
  readonly supervise: boolean;
}): Promise<JobQueue> {
  const { logger, supervise } = options;
  const boss = new PgBoss({
    connectionString: options.url,
    schema: QUEUE_SCHEMA,
    max: supervise ? 4 : 2,
    supervise,
    schedule: false,
    useListenNotify: supervise,
    superviseIntervalSeconds: SUPERVISION_SECONDS,
    monitorIntervalSeconds: SUPERVISION_SECONDS,
  });
  boss.on('error', (error) => logger.error({ err: error }, 'the job queue reports a fault'));
  boss.on('warning', ({ message }) => logger.warn({ warning: message }, 'the job queue warns'));
  await boss.start();
  await makeQueues(boss);
  return {
    enqueue: async (executor, queue, subjectId) => {
      const db = {
        executeSql: (text: string, values?: unknown[]) => rowsOf(executor, text, values),
      };
      const data: JobData = { subjectId };
      const id = await boss.send(queue, data, { db });
      if (id === null) throw new Error(`The queue ${queue} did not take the job.`);
    },
    work: async (queue, handler) => {
      await boss.work<JobData>(
        queue,
        {
          pollingIntervalSeconds: POLLING_SECONDS,
          notifyPollingIntervalSeconds: POLLING_SECONDS,
          heartbeatRefreshSeconds: HEARTBEAT_REFRESH_SECONDS,
        },
        async (jobs) => {
          for (const { data, signal, retryCount } of jobs) {
            await handler({ subjectId: data.subjectId, signal, triesBefore: retryCount });
          }
        },
      );
    },
    stop: (graceMs) => boss.stop({ graceful: true, timeout: graceMs }),
  };
}

/**
 * The queue for a process that adds jobs now and then: opened by `open`, or by the first job, so
 * that building the app without a database (to write its document down) opens nothing.
 */
export function openSenderLater(options: {
  readonly url: string;
  readonly logger: Logger;
}): JobSender & { open(): Promise<void> } {
  let opening: Promise<JobQueue> | null = null;
  const opened = (): Promise<JobQueue> => {
    opening ??= openQueue({ ...options, supervise: false }).catch((error: unknown) => {
      opening = null;
      throw error;
    });
    return opening;
  };
  return {
    open: async () => {
      await opened();
    },
    enqueue: async (executor, queue, subjectId) =>
      (await opened()).enqueue(executor, queue, subjectId),
    stop: async (graceMs) => {
      if (opening !== null) await (await opening).stop(graceMs);
    },
  };
}

async function makeQueues(boss: PgBoss): Promise<void> {
  // The queue that takes what was given up must be there before the one that names it.
  for (const [name, { givenUp }] of Object.entries(QUEUES).toReversed()) {
    const settings = {
      heartbeatSeconds: HEARTBEAT_SECONDS,
      expireInSeconds: JOB_SECONDS_MAX,
      retryLimit: RETRIES,
      retryDelay: 1,
      retryBackoff: true,
      notify: true,
      ...(givenUp === null ? {} : { deadLetter: givenUp }),
    };
    await boss.createQueue(name, settings);
    await boss.updateQueue(name, settings);
  }
}

/** What pg-boss asks of a database, answered by the transaction at hand. */
async function rowsOf(executor: Executor, text: string, values: unknown[] = []) {
  return { rows: await executor.query(text, values.map(sqlValue)) };
}

/** @throws {Error} for a parameter that pg-boss did not pass before: better than a wrong job */
function sqlValue(value: unknown): SqlValue {
  if (value === null || typeof value === 'string' || typeof value === 'number') return value;
  throw new Error(`The job queue passed a parameter of type ${typeof value}.`);
}
