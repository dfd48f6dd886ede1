import { createHash } from 'node:crypto';
import type { FastifyInstance, FastifyRequest } from 'fastify';
import { canonicalJson, type JsonValue } from '#core/hashing/canonical-json.ts';
import type { Call, Principal, Role } from './call.ts';
import { ProblemError } from './problems.ts';

declare module 'fastify' {
  interface FastifyRequest {
    principal: Principal | null;
    operatorCode: string | null;
  }
  interface FastifyContextConfig {
    /** Set on the few routes that need no token: health, documentation, problem pages. */
    open?: true;
    /** Set on routes whose body is a stream: the handler hashes it while it reads. */
    streamedBody?: true;
  }
}

export interface GuardOptions {
  /** The principal of a valid token; null when there is none, or it expired or was revoked. */
  readonly authenticate: (token: string) => Promise<Principal | null>;
  /** The permission table, by operation. */
  readonly permits: (role: Role, operation: string) => boolean;
  readonly isOperation: (operation: string) => boolean;
}

/** Operator codes are codes, not names: as written on a station's rota. */
const OPERATOR_CODE = /^[A-Za-z0-9][A-Za-z0-9_-]{0,39}$/;

const IDEMPOTENCY_KEY = /^[\x21-\x7e]{1,200}$/;

/**
 * Puts one guard before every route: who is calling (bearer token, RFC 6750), may this role do this
 * operation, which operator stands behind a station. A route without an operation in the permission
 * table stops the start, so nothing can be added outside the guard.
 */
export function installGuard(app: FastifyInstance, options: GuardOptions): void {
  app.decorateRequest('principal', null);
  app.decorateRequest('operatorCode', null);

  app.addHook('onRoute', (route) => {
    if (route.config?.open === true || route.method === 'HEAD' || route.method === 'OPTIONS')
      return;
    const operation = route.schema?.operationId;
    if (operation === undefined || !options.isOperation(operation)) {
      throw new Error(`${route.method} ${route.url} has no operation in the permission table.`);
    }
  });

  app.addHook('onRequest', async (request) => {
    if (request.is404 || request.routeOptions.config.open === true) return;
    const principal = await authenticated(request, options);
    request.principal = principal;
    const operation = request.routeOptions.schema?.operationId ?? '';
    if (!options.permits(principal.role, operation)) {
      throw new ProblemError(
        'not-permitted',
        `The role ${principal.role} may not do ${operation}.`,
      );
    }
    request.operatorCode = operatorOf(request, principal);
  });
}

/**
 * The call a handler passes to its service.
 *
 * @throws {ProblemError} `invalid-request` when the Idempotency-Key is not one
 */
export function callOf(request: FastifyRequest): Call {
  if (request.principal === null) throw new Error('callOf used on a route without a guard.');
  return {
    principal: request.principal,
    requestId: request.id,
    operator: request.operatorCode,
    idempotency: idempotencyOf(request),
    now: new Date(),
  };
}

async function authenticated(request: FastifyRequest, options: GuardOptions): Promise<Principal> {
  const match = /^Bearer ([\x21-\x7e]{1,200})$/i.exec(request.headers.authorization ?? '');
  const principal = match?.[1] === undefined ? null : await options.authenticate(match[1]);
  if (principal !== null) return principal;
  throw new ProblemError(
    'not-authenticated',
    'Send a token that is valid, not expired and not revoked, as Authorization: Bearer …',
    { headers: { 'www-authenticate': 'Bearer' } },
  );
}

function operatorOf(request: FastifyRequest, principal: Principal): string | null {
  const header = request.headers['operator-code'];
  if (header === undefined) {
    if (principal.role !== 'station' || request.method === 'GET') return null;
    throw new ProblemError(
      'missing-operator',
      'What a station does carries the code of its operator: send the header Operator-Code.',
    );
  }
  if (typeof header === 'string' && OPERATOR_CODE.test(header)) return header;
  throw new ProblemError('invalid-request', 'The header Operator-Code is not an operator code.', {
    faults: [
      {
        pointer: '/headers/operator-code',
        code: 'pattern',
        message:
          '1 to 40 letters, digits, hyphens and underscores, beginning with a letter or digit.',
      },
    ],
  });
}

function idempotencyOf(request: FastifyRequest): Call['idempotency'] {
  const key = request.headers['idempotency-key'];
  if (key === undefined || request.method === 'GET') return null;
  if (typeof key !== 'string' || !IDEMPOTENCY_KEY.test(key)) {
    throw new ProblemError('invalid-request', 'The Idempotency-Key is not valid.', {
      faults: [
        {
          pointer: '/headers/idempotency-key',
          code: 'pattern',
          message: '1 to 200 visible ASCII characters.',
        },
      ],
    });
  }
  const streamed = request.routeOptions.config.streamedBody === true;
  const parts = [
    request.method,
    request.url,
    request.operatorCode ?? '',
    streamed ? '' : bodyText(request.body),
  ];
  return { key, requestHash: createHash('sha256').update(parts.join('\n')).digest('hex') };
}

/** The body was JSON a moment ago, so it has a canonical form. */
function bodyText(body: unknown): string {
  if (body === undefined || body === null) return '';
  return canonicalJson(JSON.parse(JSON.stringify(body)) as JsonValue);
}
