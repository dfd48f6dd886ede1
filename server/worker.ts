// A worker: takes analysis jobs from the queue, one at a time, until it is told to stop. Any number
// may run, on any machines that reach the database; each needs DATABASE_URL and nothing else.
import type { Logger } from 'pino';
import { ConfigurationError, loadConfig } from '#platform/config.ts';
import { openDatabase } from '#platform/database.ts';
import { createLogger } from '#platform/logging.ts';
import { openQueue } from '#platform/queue.ts';
import { createAnalysisRunner } from '#server/analyses/run-analysis.ts';
import { fileReport } from '#server/reports/service.ts';

/** A worker computes in one thread and writes little: it needs few connections. */
const POOL_SIZE = 3;

/** Part of the stopping time that is kept for handing back what did not finish. */
const CLOSING_MS = 2000;

await run();

async function run(): Promise<void> {
  let logger: Logger | undefined;
  try {
    const config = loadConfig(process.env);
    const url = config.databaseUrl;
    if (url === null) {
      throw new ConfigurationError(
        'DATABASE_URL must be set: a worker has no database of its own.',
      );
    }
    const secrets = new Set([decodeURIComponent(new URL(url).password)]);
    logger = createLogger({ level: config.logLevel, secrets }).child({ worker: process.pid });
    const told = toldToStop();
    const close = await open(url, logger);
    logger.info('worker ready');
    const reason = await told;
    logger.info({ reason }, 'worker stopping');
    await close(Math.max(config.shutdownSeconds * 1000 - CLOSING_MS, 0));
    logger.info('worker stopped');
  } catch (error) {
    if (error instanceof ConfigurationError || logger === undefined) {
      process.stderr.write(`fairturn worker: ${error instanceof Error ? error.message : error}\n`);
    } else {
      logger.fatal({ err: error }, 'the worker ended on a fault');
    }
    process.exitCode = 1;
  }
  // Whatever a library left open must not keep a worker alive that has closed everything.
  process.exit();
}

/** @returns what closes everything, giving jobs at hand the time named */
async function open(url: string, logger: Logger): Promise<(graceMs: number) => Promise<void>> {
  const database = openDatabase({ url, poolSize: POOL_SIZE });
  const queue = await openQueue({ url, logger, supervise: true });
  const runner = createAnalysisRunner({ database, logger, fileReport });
  await queue.work('run-analysis', (job) => runner.run(job));
  await queue.work('analysis-given-up', (job) => runner.giveUp(job));
  return async (graceMs) => {
    await queue.stop(graceMs);
    await database.close();
  };
}

/** Resolves at a signal, or when the service that started this worker is gone. */
function toldToStop(): Promise<string> {
  const { promise, resolve } = Promise.withResolvers<string>();
  let signals = 0;
  for (const signal of ['SIGTERM', 'SIGINT'] as const) {
    process.on(signal, () => {
      signals += 1;
      if (signals > 1) process.exit(1);
      resolve(signal);
    });
  }
  if (process.connected) process.once('disconnect', () => resolve('the service is gone'));
  return promise;
}
