import type { FastifyInstance } from 'fastify';
import type { Database } from './database.ts';
import { ProblemError } from './problems.ts';

/** `/healthz`: the process answers. `/readyz`: it can also reach its database. */
export function registerHealth(app: FastifyInstance, database: Database): void {
  app.get('/healthz', { config: { open: true } }, () => ({ status: 'alive' }));
  app.get('/readyz', { config: { open: true } }, async () => {
    try {
      await database.ping();
    } catch {
      throw new ProblemError('not-ready', 'The database does not answer.');
    }
    return { status: 'ready' };
  });
}
