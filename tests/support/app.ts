import type { FastifyInstance } from 'fastify';
import type { Logger } from 'pino';
import request, { type Response } from 'supertest';
import { type Config, loadConfig } from '#platform/config.ts';
import { type Database, openDatabase } from '#platform/database.ts';
import { createLogger } from '#platform/logging.ts';
import { ensureFirstAdministrator } from '#server/access/service.ts';
import { buildApp } from '#server/app.ts';
import { cloneDatabase } from './database.ts';

/** Requests of one token, with the operator code that stations need. */
export interface Caller {
  get(url: string, headers?: Record<string, string>): Promise<Response>;
  post(url: string, body?: object | string, headers?: Record<string, string>): Promise<Response>;
  put(url: string, body: object, headers?: Record<string, string>): Promise<Response>;
}

/** The real app on a database of its own. */
export interface TestService {
  readonly app: FastifyInstance;
  readonly config: Config;
  readonly database: Database;
  readonly databaseUrl: string;
  readonly logger: Logger;
  /** Token of the first administrator. */
  readonly administrator: string;
  /** Requests with this token; null sends none. */
  as(token: string | null, operator?: string): Caller;
  /** Another instance of the app on the same database, listening; gives its base URL. */
  startInstance(): Promise<string>;
  close(): Promise<void>;
}

export async function startTestService(
  environment: Record<string, string> = {},
): Promise<TestService> {
  const cloned = await cloneDatabase();
  const config = loadConfig({
    DATABASE_URL: cloned.url,
    FAIRTURN_LOG_LEVEL: 'silent',
    FAIRTURN_RATE_LIMIT: '0',
    ...environment,
  });
  const logger = createLogger({ level: config.logLevel });
  const database = openDatabase({ url: cloned.url, poolSize: 8 });
  const app = await buildApp({ config, database, logger });
  await app.ready();
  const first = await ensureFirstAdministrator(database);
  if (first === null) throw new Error('The cloned database has an administrator already.');
  const closers = [() => cloned.drop(), () => database.close(), () => app.close()];
  return {
    app,
    config,
    database,
    databaseUrl: cloned.url,
    logger,
    administrator: first.token,
    as: (token, operator) => callerOf(app, token, operator),
    startInstance: async () => {
      const own = openDatabase({ url: cloned.url, poolSize: 8 });
      const instance = await buildApp({ config, database: own, logger });
      closers.push(
        () => own.close(),
        () => instance.close(),
      );
      return await instance.listen({ host: '127.0.0.1', port: 0 });
    },
    close: async () => {
      for (const close of closers.reverse()) await close();
    },
  };
}

/** Requests to this app with this token; null sends none. */
export function callerOf(app: FastifyInstance, token: string | null, operator?: string): Caller {
  const common = {
    ...(token === null ? {} : { authorization: `Bearer ${token}` }),
    ...(operator === undefined ? {} : { 'operator-code': operator }),
  };
  const server = () => request(app.server);
  return {
    get: async (url, headers = {}) =>
      await server()
        .get(url)
        .set({ ...common, ...headers }),
    post: async (url, body, headers = {}) =>
      await server()
        .post(url)
        .set({ ...common, ...headers })
        .send(body),
    put: async (url, body, headers = {}) =>
      await server()
        .put(url)
        .set({ ...common, ...headers })
        .send(body),
  };
}
