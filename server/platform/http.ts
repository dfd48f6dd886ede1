import helmet from '@fastify/helmet';
import rateLimit from '@fastify/rate-limit';
import fastify, {
  type FastifyBaseLogger,
  type FastifyError,
  type FastifyInstance,
  type FastifyRequest,
  LogController,
} from 'fastify';
import {
  hasZodFastifySchemaValidationErrors,
  serializerCompiler,
  validatorCompiler,
  type ZodFastifySchemaValidationError,
} from 'fastify-type-provider-zod';
import type { Logger } from 'pino';
import { z } from 'zod';
import { uuidv7 } from './ids.ts';
import {
  type Fault,
  PROBLEM_TYPES,
  ProblemError,
  type ProblemType,
  problemPath,
  problems,
} from './problems.ts';

export interface HttpOptions {
  readonly logger: Logger;
  readonly bodyLimitBytes: number;
  /** Requests a minute and token (or address, without one); 0 is no limit. */
  readonly rateLimitPerMinute: number;
  readonly trustProxy: boolean;
}

export const PROBLEM_MEDIA_TYPE = 'application/problem+json';

const ProblemFault = z.strictObject({
  pointer: z.string().describe('JSON pointer (RFC 6901) to what is wrong'),
  code: z.string(),
  message: z.string(),
  expected: z.string().optional(),
  received: z.string().optional(),
  row: z.number().int().optional().describe('Row of an upload, from 1'),
});

/** RFC 9457 problem details, with one entry a fault for bad input. */
export const ProblemResponse = z
  .strictObject({
    type: z.enum(PROBLEM_TYPES.map(problemPath)),
    title: z.string(),
    status: z.number().int(),
    detail: z.string(),
    instance: z.string(),
    faults: z.array(ProblemFault).optional(),
  })
  .meta({ id: 'Problem' });

/**
 * The bare HTTP server: request ids, zod validation, problem details for every refusal, security
 * headers, rate limit. Features and the guard come on top (`server/app.ts`).
 */
export async function createHttp(options: HttpOptions): Promise<FastifyInstance> {
  const logger: FastifyBaseLogger = options.logger;
  const app: FastifyInstance = fastify({
    loggerInstance: logger,
    bodyLimit: options.bodyLimitBytes,
    trustProxy: options.trustProxy,
    genReqId: () => uuidv7(),
    requestIdHeader: false,
    // Fastify would log addresses as they came, and participants' codes stand in them.
    logController: new LogController({ disableRequestLogging: true }),
    routerOptions: { maxParamLength: 200 },
    // Requests under way are answered before the server closes.
    return503OnClosing: true,
  });
  app.setValidatorCompiler(validatorCompiler);
  app.setSerializerCompiler(serializerCompiler);
  app.addHook('onRequest', async (request, reply) => {
    reply.header('request-id', request.id);
  });
  app.addHook('onResponse', async (request, reply) => {
    const { statusCode, elapsedTime } = reply;
    const route = request.routeOptions.url ?? 'none';
    request.log.info({ method: request.method, route, statusCode, elapsedTime }, 'answered');
  });
  app.addHook('onRoute', (route) => {
    if (route.schema === undefined) return;
    route.schema.response = {
      ...(route.schema.response as Record<string, unknown> | undefined),
      default: {
        description: 'Problem details (RFC 9457)',
        content: { [PROBLEM_MEDIA_TYPE]: { schema: ProblemResponse } },
      },
    };
  });
  await app.register(helmet, { contentSecurityPolicy: pagePolicy() });
  if (options.rateLimitPerMinute > 0) {
    await app.register(rateLimit, {
      max: options.rateLimitPerMinute,
      timeWindow: 60_000,
      keyGenerator: (request) => request.headers.authorization ?? request.ip,
      errorResponseBuilder: (_request, context) =>
        new ProblemError('too-many-requests', `Try again in ${context.after}.`),
    });
  }
  app.setErrorHandler((error: FastifyError | ProblemError, request, reply) => {
    const problem = asProblem(error, request);
    if (problem.status >= 500) request.log.error({ err: loggable(error) }, 'request failed');
    else request.log.info({ problem: problem.problem }, 'refused');
    return reply
      .status(problem.status)
      .headers(problem.headers)
      .header('content-type', PROBLEM_MEDIA_TYPE)
      .send(problem.details(request.id));
  });
  app.setNotFoundHandler((request) => {
    throw new ProblemError('not-found', `Nothing is served at ${request.method} ${request.url}.`);
  });
  return app;
}

/** Pages of the service (documentation, problems, reports) bring their own style and no script. */
function pagePolicy() {
  return {
    useDefaults: false,
    directives: {
      'default-src': ["'none'"],
      'style-src': ["'unsafe-inline'"],
      'img-src': ['data:'],
      'base-uri': ["'none'"],
      'form-action': ["'none'"],
      'frame-ancestors': ["'none'"],
    },
  };
}

function asProblem(error: FastifyError | ProblemError, request: FastifyRequest): ProblemError {
  if (error instanceof ProblemError) return error;
  if (hasZodFastifySchemaValidationErrors(error)) {
    const part = error.validationContext ?? 'body';
    return new ProblemError('invalid-request', `The ${part} of the request is not valid.`, {
      faults: error.validation.flatMap((issue) => faultsOf(issue, part)),
    });
  }
  if (error.code === 'FST_ERR_RESPONSE_SERIALIZATION') {
    request.log.error({ err: loggable(error.cause) }, 'an answer does not fit its schema');
    return new ProblemError('internal-error', 'The answer could not be put together.');
  }
  if (error.statusCode === 413) return new ProblemError('payload-too-large', error.message);
  if (error.statusCode === 415) return new ProblemError('unsupported-media-type', error.message);
  if (error.statusCode !== undefined && error.statusCode >= 400 && error.statusCode < 500) {
    return new ProblemError('invalid-request', error.message);
  }
  return new ProblemError('internal-error', 'The fault was logged under this request id.');
}

/**
 * What of an unexpected error may be logged. Database errors carry the offending row and the
 * query's parameters in further fields, and those may be somebody's values.
 */
function loggable(error: unknown): { type: string; message: string; stack: string } {
  if (!(error instanceof Error)) return { type: typeof error, message: '', stack: '' };
  return { type: error.name, message: error.message, stack: error.stack ?? '' };
}

/** Body faults point into the body; faults elsewhere name the part first (`/query/limit`). */
function faultsOf(issue: ZodFastifySchemaValidationError, part: string): Fault[] {
  const base = { querystring: '/query', params: '/path', headers: '/headers' }[part] ?? '';
  const place = `${base}${issue.instancePath === '/' ? '' : issue.instancePath}`;
  const { expected, keys } = issue.params;
  if (issue.keyword === 'unrecognized_keys' && Array.isArray(keys)) {
    return keys.map((key) => ({
      pointer: `${place}/${pointerToken(String(key))}`,
      code: 'unknown-field',
      message: 'There is no such field.',
    }));
  }
  return [
    {
      pointer: place,
      code: issue.keyword.replaceAll('_', '-'),
      message: issue.message ?? 'Not valid.',
      ...(typeof expected === 'string' ? { expected } : {}),
    },
  ];
}

/** Escapes one token of a JSON pointer (RFC 6901 §3). */
function pointerToken(text: string): string {
  return text.replaceAll('~', '~0').replaceAll('/', '~1');
}

/** Serves one page a problem type, so that every `type` URI leads somewhere. */
export function registerProblemPages(app: FastifyInstance): void {
  for (const name of PROBLEM_TYPES) {
    app.get(problemPath(name), { config: { open: true } }, (_request, reply) =>
      reply.type('text/html; charset=utf-8').send(problemPage(name)),
    );
  }
}

function problemPage(name: ProblemType): string {
  const { title, status } = problems[name];
  return `<!doctype html>
<html lang="en">
<meta charset="utf-8">
<title>${title}</title>
<h1>${title}</h1>
<p>Problem type <code>${name}</code>, answered with HTTP status ${status}. The field
<code>detail</code> of the answer says what was wrong with the request at hand;
<code>faults</code>, where given, names each place.</p>
</html>
`;
}
