import createClient, { type Client } from 'openapi-fetch';
import type { paths } from './generated/api.ts';
import { errorOf, NetworkError } from './problems.ts';
import {
  DEFAULT_RETRY,
  isNotNow,
  pause,
  pauseAfter,
  type RetryPolicy,
  retryAfterMs,
} from './retry.ts';

export interface FairturnOptions {
  /** Where the service is, such as `https://fairturn.example`. */
  readonly url: string;
  /** A token of the service. */
  readonly token: string;
  /** Code of the person at the station; stations must name one for whatever they change. */
  readonly operator?: string;
  readonly retry?: Partial<RetryPolicy>;
  /** How long one try may take. Streams must begin within it. Default: one minute. */
  readonly timeoutMs?: number;
  /** What sends a request; the platform's `fetch` unless given. */
  readonly fetch?: (url: string, init: RequestInit) => Promise<Response>;
}

/** A request beside the typed ones: bodies that are not JSON, and streams. */
export interface PlainRequest {
  readonly method: 'GET' | 'POST' | 'PUT';
  /** From `/v1` on, encoded, with the query. */
  readonly path: string;
  readonly headers?: Readonly<Record<string, string>>;
  readonly body?: string | Uint8Array<ArrayBuffer>;
  readonly signal?: AbortSignal;
  /** The answer's body is handed on as it comes; otherwise it is read whole within the try. */
  readonly streamed?: boolean;
  /** One try instead of the policy's: for callers that come again by themselves. */
  readonly once?: boolean;
}

const DEFAULT_TIMEOUT_MS = 60_000;

/**
 * Sends requests with the token, the operator and, for whatever changes something, an
 * Idempotency-Key that stays the same over all tries, so that nothing is done twice however often a
 * request is repeated.
 */
export class Connection {
  /** The typed client over every operation of the API. */
  readonly api: Client<paths>;
  readonly options: FairturnOptions;
  readonly #retry: RetryPolicy;
  readonly #base: string;

  constructor(options: FairturnOptions) {
    this.options = options;
    this.#retry = { ...DEFAULT_RETRY, ...options.retry };
    this.#base = options.url.replace(/\/+$/, '');
    this.api = createClient<paths>({
      baseUrl: this.#base,
      fetch: (request) => this.#sendTyped(request),
    });
  }

  /**
   * @throws {ProblemError} when the service refuses
   * @throws {NetworkError} when no answer came
   */
  async send(request: PlainRequest): Promise<Response> {
    const response = await this.#tryAll(`${this.#base}${request.path}`, request);
    if (!response.ok) throw errorOf(response.status, await response.text());
    return response;
  }

  async #sendTyped(request: Request): Promise<Response> {
    const body = request.body === null ? undefined : new Uint8Array(await request.arrayBuffer());
    return await this.#tryAll(request.url, {
      method: request.method as PlainRequest['method'],
      headers: Object.fromEntries(request.headers),
      ...(body === undefined ? {} : { body }),
      signal: request.signal,
    });
  }

  async #tryAll(url: string, request: Omit<PlainRequest, 'path'>): Promise<Response> {
    const headers = this.#headersOf(request);
    const attempts = request.once === true ? 1 : this.#retry.attempts;
    for (let attempt = 1; ; attempt += 1) {
      const outcome = await this.#tryOnce(url, request, headers);
      if (request.signal?.aborted === true) throw request.signal.reason;
      if (outcome instanceof Response) {
        const waitMs = this.#waitFor(outcome, attempt, attempts);
        if (waitMs === null) return outcome;
        await outcome.body?.cancel();
        await pause(waitMs, request.signal);
        continue;
      }
      if (attempt >= attempts) {
        const message = `No answer from ${url} after ${attempt} ${attempt === 1 ? 'try' : 'tries'}`;
        throw new NetworkError(message, { attempts: attempt, cause: outcome.fault });
      }
      await pause(pauseAfter(this.#retry, attempt, Math.random()), request.signal);
    }
  }

  /** How long to wait before this answer's request is tried again; null when it is not. */
  #waitFor(response: Response, attempt: number, attempts: number): number | null {
    if (!isNotNow(response.status) || attempt >= attempts) return null;
    const asked = retryAfterMs(response.headers.get('retry-after'), Date.now());
    if (asked === null) return pauseAfter(this.#retry, attempt, Math.random());
    return asked > this.#retry.retryAfterMsMax ? null : asked;
  }

  /** One try, bounded in time; an answer read whole, unless it is streamed. */
  async #tryOnce(
    url: string,
    request: Omit<PlainRequest, 'path'>,
    headers: Record<string, string>,
  ): Promise<Response | { fault: unknown }> {
    const abort = new AbortController();
    const pass = () => abort.abort(request.signal?.reason);
    if (request.signal?.aborted === true) pass();
    request.signal?.addEventListener('abort', pass, { once: true });
    const timeoutMs = this.options.timeoutMs ?? DEFAULT_TIMEOUT_MS;
    const timer = setTimeout(() => {
      abort.abort(new Error(`The service did not answer within ${timeoutMs} ms.`));
    }, timeoutMs);
    try {
      const { method, body } = request;
      const init = {
        method,
        headers,
        signal: abort.signal,
        ...(body === undefined ? {} : { body }),
      };
      const response = await (this.options.fetch ?? fetch)(url, init);
      // The caller of a stream goes on listening to its own signal.
      if (request.streamed === true && response.ok) return response;
      return await readWhole(response);
    } catch (fault) {
      return { fault };
    } finally {
      clearTimeout(timer);
      if (request.streamed !== true) request.signal?.removeEventListener('abort', pass);
    }
  }

  #headersOf({ method, headers }: Omit<PlainRequest, 'path'>): Record<string, string> {
    const own: Record<string, string> = { authorization: `Bearer ${this.options.token}` };
    if (this.options.operator !== undefined) own['operator-code'] = this.options.operator;
    if (method !== 'GET') own['idempotency-key'] = crypto.randomUUID();
    return { ...own, ...headers };
  }
}

/** Statuses whose answers have no body (Fetch standard, "null body status"). */
const BODILESS: ReadonlySet<number> = new Set([204, 205, 304]);

async function readWhole(response: Response): Promise<Response> {
  const { status, statusText, headers } = response;
  const body = await response.arrayBuffer();
  return new Response(BODILESS.has(status) ? null : body, { status, statusText, headers });
}

/**
 * The body of a typed call's answer.
 *
 * @throws {ProblemError} when the service refuses
 */
export async function answered<Data>(
  call: Promise<{ data?: Data; error?: unknown; response: Response }>,
): Promise<NonNullable<Data>> {
  const { data, error, response } = await call;
  if (response.ok && data !== undefined && data !== null) return data;
  const text = typeof error === 'string' ? error : JSON.stringify(error ?? null);
  throw errorOf(response.status, text);
}
