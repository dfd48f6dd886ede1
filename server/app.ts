import type { FastifyInstance } from 'fastify';
import type { Logger } from 'pino';
import type { Config } from '#platform/config.ts';
import type { Database } from '#platform/database.ts';
import { installGuard } from '#platform/guard.ts';
import { registerHealth } from '#platform/health.ts';
import { createHttp, registerProblemPages } from '#platform/http.ts';
import { registerOpenApi, registerReference } from '#platform/openapi.ts';
import { openSenderLater } from '#platform/queue.ts';
import { isOperation, permits, rolesOf } from '#server/access/permissions.ts';
import { accessRoutes } from '#server/access/routes.ts';
import { createAccessService } from '#server/access/service.ts';
import { allocationsRoutes } from '#server/allocations/routes.ts';
import { createAllocationsService } from '#server/allocations/service.ts';
import { analysisRoutes } from '#server/analyses/routes.ts';
import { createAnalysesService, forgetSnapshotParticipant } from '#server/analyses/service.ts';
import { auditRoutes } from '#server/audit/routes.ts';
import { createAuditService } from '#server/audit/service.ts';
import { reportRoutes } from '#server/reports/routes.ts';
import { createReportsService } from '#server/reports/service.ts';
import { studiesRoutes } from '#server/studies/routes.ts';
import { createStudiesService } from '#server/studies/service.ts';
import { trialsRoutes } from '#server/trials/routes.ts';
import { createTrialsService } from '#server/trials/service.ts';

export interface AppOptions {
  readonly config: Config;
  readonly database: Database;
  readonly logger: Logger;
}

/**
 * Config and database in, a Fastify instance out. It never listens, so that `main.ts` and the tests
 * use the very same one. Features are put together here and nowhere else.
 */
export async function buildApp({ config, database, logger }: AppOptions): Promise<FastifyInstance> {
  const app = await createHttp({
    logger,
    bodyLimitBytes: config.bodyLimitBytes,
    rateLimitPerMinute: config.rateLimitPerMinute,
    trustProxy: config.trustProxy,
  });
  await registerOpenApi(app);

  const access = createAccessService(database);
  const studies = createStudiesService(database);
  const audit = createAuditService({ database, maySeeStudy: studies.maySeeStudy });
  const allocations = createAllocationsService(database);
  const trials = createTrialsService({ database, onErase: [forgetSnapshotParticipant] });
  const queue = openSenderLater({ url: database.url, logger });
  app.addHook('onListen', () => queue.open());
  app.addHook('onClose', () => queue.stop(0));
  const analyses = createAnalysesService({
    database,
    queue,
    onWatchFault: (error) => logger.error({ err: error }, 'followed analyses were not read'),
  });

  installGuard(app, { authenticate: access.authenticate, permits, isOperation });
  registerHealth(app, database);
  registerProblemPages(app);
  registerReference(app, rolesOf);
  await app.register(accessRoutes, { service: access });
  await app.register(auditRoutes, { service: audit });
  await app.register(studiesRoutes, { service: studies });
  await app.register(allocationsRoutes, { service: allocations });
  await app.register(trialsRoutes, { service: trials });
  await app.register(analysisRoutes, { service: analyses });
  await app.register(reportRoutes, { service: createReportsService(database) });
  return app;
}
