// Writes openapi.yaml from the zod schemas of the running service's routes.
import { writeFileSync } from 'node:fs';
import { fileURLToPath } from 'node:url';
import { pino } from 'pino';
import { buildApp } from '../app.ts';
import { loadConfig } from './config.ts';
import { openDatabase } from './database.ts';
import { openApiYaml } from './openapi.ts';

/** Reserved and never listened on (RFC 6335, port 0): nothing is asked of a database here. */
const NO_DATABASE = 'postgresql://nobody@127.0.0.1:0/none';

/** openapi.yaml as the code has it now. */
export async function currentOpenApi(): Promise<string> {
  const config = loadConfig({ DATABASE_URL: NO_DATABASE });
  const database = openDatabase({ url: NO_DATABASE, poolSize: 1 });
  const app = await buildApp({ config, database, logger: pino({ level: 'silent' }) });
  try {
    await app.ready();
    return openApiYaml(app);
  } finally {
    await app.close();
    await database.close();
  }
}

if (import.meta.main) {
  const file = fileURLToPath(new URL('../../openapi.yaml', import.meta.url));
  writeFileSync(file, await currentOpenApi());
}
