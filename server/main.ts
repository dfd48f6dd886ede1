// The service: reads its configuration, opens and migrates the database, listens, and on SIGTERM or
// SIGINT finishes what is under way and closes everything in the reverse order.
import { setTimeout as pause } from 'node:timers/promises';
import type { FastifyInstance } from 'fastify';
import type { Logger } from 'pino';
import { type Config, ConfigurationError, loadConfig } from '#platform/config.ts';
import { type Database, openDatabase } from '#platform/database.ts';
import { startEmbeddedPostgres } from '#platform/embedded-postgres.ts';
import { FolderLockedError } from '#platform/folder-lock.ts';
import { createLogger } from '#platform/logging.ts';
import { collectEarly } from '#platform/memory.ts';
import { MigrationError, migrate } from '#platform/migrations.ts';
import { EmbeddedPostgresError } from '#platform/postgres-programs.ts';
import { startWorkerProcesses } from '#platform/worker-processes.ts';
import { ensureFirstAdministrator } from '#server/access/service.ts';
import { buildApp } from '#server/app.ts';
import { ensureSigningKey } from '#server/audit/service.ts';

/** What was opened, to be closed in the reverse order. */
type Closers = (() => Promise<void>)[];

interface Opening {
  readonly config: Config;
  readonly logger: Logger;
  readonly secrets: Set<string>;
  readonly closers: Closers;
  /** Called when something that the service cannot do without has gone. */
  readonly fail: (error: Error) => void;
}

/** Faults whose message says all there is to say to whoever starts the service. */
const PLAIN_FAULTS = [ConfigurationError, FolderLockedError, EmbeddedPostgresError, MigrationError];

/** No connection, or one refused for its password, account or database (SQLSTATE). */
const UNREACHABLE = [
  'ECONNREFUSED',
  'ENOTFOUND',
  'EAI_AGAIN',
  'ETIMEDOUT',
  'CONNECT_TIMEOUT',
  '28P01',
  '28000',
  '3D000',
];
const UNAVAILABLE = ['EADDRINUSE', 'EADDRNOTAVAIL', 'EACCES', 'ENOTFOUND'];

const IDLE_CHECK_MS = 100;
const DATABASE_CLOSE_MS_MAX = 2000;

collectEarly();
await run();

async function run(): Promise<void> {
  const closers: Closers = [];
  let logger: Logger | undefined;
  try {
    const config = loadConfig(process.env);
    const secrets = new Set<string>();
    logger = createLogger({ level: config.logLevel, secrets });
    const ending = awaitEnding();
    await open({ config, logger, secrets, closers, fail: ending.fail });
    const signal = await ending.ended;
    logger.info({ signal }, 'stopping');
    await closeAll(closers);
    logger.info('stopped');
  } catch (error) {
    report(error, logger);
    process.exitCode = 1;
    await closeAll(closers).catch((closing: unknown) => report(closing, logger));
  }
  // Whatever a library left open must not keep a service alive that has closed everything.
  process.exit();
}

/** Listens for the signals from the start on; a second one ends the process at once. */
function awaitEnding(): { ended: Promise<NodeJS.Signals>; fail: (error: Error) => void } {
  const { promise: ended, resolve, reject } = Promise.withResolvers<NodeJS.Signals>();
  // A failure before anybody waits is not lost: it is thrown when `ended` is awaited.
  ended.catch(() => undefined);
  let signals = 0;
  for (const signal of ['SIGTERM', 'SIGINT'] as const) {
    process.on(signal, () => {
      signals += 1;
      if (signals > 1) process.exit(1);
      resolve(signal);
    });
  }
  return { ended, fail: reject };
}

async function open(opening: Opening): Promise<void> {
  const { config, logger, closers } = opening;
  const url = await databaseUrl(opening);
  const { applied } = await migrate(url).catch((error: unknown) => {
    throw isSystemFault(error, UNREACHABLE) && config.databaseUrl !== null
      ? new ConfigurationError(
          `DATABASE_URL names a database that cannot be used: ${error.message}`,
        )
      : error;
  });
  if (applied.length > 0) logger.info({ applied }, 'migrations applied');

  const database = openDatabase({ url, poolSize: config.databasePoolSize });
  closers.push(() => closeDatabase(database));
  await database.inSqlTransaction(ensureSigningKey);
  const first = await ensureFirstAdministrator(database);
  if (first !== null) showFirstToken(first.token);

  const workers = startWorkerProcesses({ count: config.workers, databaseUrl: url, logger });
  closers.push(() => workers.stop(config.shutdownSeconds));

  const app = await buildApp({ config, database, logger });
  closers.push(() => closeWithin(app, config.shutdownSeconds));
  const { host, port } = config;
  const address = await app.listen({ host, port }).catch((error: unknown) => {
    throw isSystemFault(error, UNAVAILABLE)
      ? new ConfigurationError(
          `FAIRTURN_HOST ${host} and FAIRTURN_PORT ${port} cannot be listened on: ${error.message}`,
        )
      : error;
  });
  process.stdout.write(`Fairturn listens on ${address}\n`);
}

async function databaseUrl({ config, logger, secrets, closers, fail }: Opening): Promise<string> {
  if (config.databaseUrl !== null) {
    secrets.add(decodeURIComponent(new URL(config.databaseUrl).password));
    return config.databaseUrl;
  }
  const server = await startEmbeddedPostgres({
    folder: config.dataFolder,
    log: (line) => logger.debug({ postgres: line }),
  });
  closers.push(() => server.stop());
  void server.lost.then(fail);
  secrets.add(new URL(server.url).password);
  return server.url;
}

/** Shown once, to the person at the first start, and kept nowhere: the logger never sees it. */
function showFirstToken(token: string): void {
  process.stdout.write(
    `\nThis is the administrator's token. It is shown once and stored only as a hash:\n\n` +
      `  ${token}\n\n`,
  );
}

/** Takes no new connection, answers what is under way, and after `seconds` cuts what is left. */
async function closeWithin(app: FastifyInstance, seconds: number): Promise<void> {
  // A connection that was kept alive for more requests is idle only after its answer.
  const idle = setInterval(() => app.server.closeIdleConnections(), IDLE_CHECK_MS);
  const late = setTimeout(() => app.server.closeAllConnections(), seconds * 1000);
  await app.close();
  clearInterval(idle);
  clearTimeout(late);
}

/** A query of a request that was cut may still wait in the database: it is not waited for. */
async function closeDatabase(database: Database): Promise<void> {
  await Promise.race([database.close(), pause(DATABASE_CLOSE_MS_MAX)]);
}

/** Closes the last opened first, and everything even when something does not close well. */
async function closeAll(closers: Closers): Promise<void> {
  const faults: unknown[] = [];
  for (let close = closers.pop(); close !== undefined; close = closers.pop()) {
    await close().catch((error: unknown) => faults.push(error));
  }
  if (faults.length > 0) throw new AggregateError(faults, 'Not everything closed well.');
}

function isSystemFault(error: unknown, codes: readonly string[]): error is Error {
  return error instanceof Error && 'code' in error && codes.includes(String(error.code));
}

function report(error: unknown, logger: Logger | undefined): void {
  if (PLAIN_FAULTS.some((fault) => error instanceof fault)) {
    process.stderr.write(`fairturn: ${(error as Error).message}\n`);
  } else if (logger === undefined) {
    process.stderr.write(`fairturn: ${String(error)}\n`);
  } else {
    logger.fatal({ err: error }, 'the service ended on a fault');
  }
}
