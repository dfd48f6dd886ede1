import { pino } from 'pino';
import { type Config, loadConfig } from '#platform/config.ts';
import { type Database, openDatabase } from '#platform/database.ts';
import { ensureFirstAdministrator } from '#server/access/service.ts';
import { buildApp } from '#server/app.ts';
import { Fairturn } from '../../client-sdk/src/index.ts';
import { cloneDatabase } from '../support/database.ts';

export interface ListeningService {
  readonly url: string;
  readonly database: Database;
  readonly administratorToken: string;
  /** A client of the administrator. */
  readonly administrator: Fairturn;
  close(): Promise<void>;
}

/** The real service on a database of its own, listening on this machine. */
export async function startListeningService(
  changes: Partial<Config> = {},
): Promise<ListeningService> {
  const clone = await cloneDatabase();
  const config = {
    ...loadConfig({ DATABASE_URL: clone.url, FAIRTURN_RATE_LIMIT: '0' }),
    ...changes,
  };
  const database = openDatabase({ url: clone.url, poolSize: 5 });
  const first = await ensureFirstAdministrator(database);
  if (first === null) throw new Error('The template has an administrator already.');
  const app = await buildApp({ config, database, logger: pino({ level: 'silent' }) });
  const url = await app.listen({ host: '127.0.0.1', port: 0 });
  return {
    url,
    database,
    administratorToken: first.token,
    administrator: new Fairturn({ url, token: first.token }),
    close: async () => {
      app.server.closeAllConnections();
      await app.close();
      await database.close();
      await clone.drop();
    },
  };
}
