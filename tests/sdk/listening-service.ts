import type { Database } from '#platform/database.ts';
import { Fairturn } from '../../client-sdk/src/index.ts';
import { startTestService } from '../support/app.ts';

export interface ListeningService {
  readonly url: string;
  readonly database: Database;
  readonly databaseUrl: string;
  readonly administratorToken: string;
  /** A client of the administrator. */
  readonly administrator: Fairturn;
  close(): Promise<void>;
}

/** The real service on a database of its own, listening on this machine, as clients meet it. */
export async function startListeningService(): Promise<ListeningService> {
  const service = await startTestService();
  const url = await service.startInstance();
  return {
    url,
    database: service.database,
    databaseUrl: service.databaseUrl,
    administratorToken: service.administrator,
    administrator: new Fairturn({ url, token: service.administrator }),
    close: () => service.close(),
  };
}
