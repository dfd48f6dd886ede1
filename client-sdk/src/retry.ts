/** How often and how patiently a request is tried again. Times in milliseconds. */
export interface RetryPolicy {
  /** Tries of one request in all, the first included; at least 1. */
  readonly attempts: number;
  /** The pause after the first try is drawn from 0 to this; the bound doubles with each try. */
  readonly pauseMs: number;
  /** The bound stops doubling here. */
  readonly pauseMsMax: number;
  /** A `Retry-After` longer than this is not waited for: the answer is given to the caller. */
  readonly retryAfterMsMax: number;
}

export const DEFAULT_RETRY: RetryPolicy = {
  attempts: 5,
  pauseMs: 250,
  pauseMsMax: 8000,
  retryAfterMsMax: 60_000,
};

/** Statuses that say "not now": too many requests, and a service or a proxy that cannot yet. */
const NOT_NOW: ReadonlySet<number> = new Set([429, 502, 503, 504]);

export function isNotNow(status: number): boolean {
  return NOT_NOW.has(status);
}

/**
 * Exponential back-off with full jitter, so that stations that lost the link together do not come
 * back together.
 *
 * @param attempt the try that just failed, from 1
 * @param chance  in [0, 1)
 */
export function pauseAfter(policy: RetryPolicy, attempt: number, chance: number): number {
  return chance * Math.min(policy.pauseMsMax, policy.pauseMs * 2 ** (attempt - 1));
}

/**
 * What a `Retry-After` header asks for, in milliseconds: delay-seconds or an HTTP date (RFC 9110
 * §10.2.3). Null when there is none or it cannot be read.
 */
export function retryAfterMs(header: string | null, nowMs: number): number | null {
  if (header === null) return null;
  if (/^\d+$/.test(header.trim())) return Number(header.trim()) * 1000;
  const at = Date.parse(header);
  return Number.isNaN(at) ? null : Math.max(0, at - nowMs);
}

/** Resolves after a while; rejects with the signal's reason when that comes first. */
export function pause(durationMs: number, signal?: AbortSignal): Promise<void> {
  return new Promise((resolve, reject) => {
    if (signal?.aborted === true) {
      reject(signal.reason);
      return;
    }
    const stop = () => {
      clearTimeout(timer);
      reject(signal?.reason);
    };
    const timer = setTimeout(() => {
      signal?.removeEventListener('abort', stop);
      resolve();
    }, durationMs);
    signal?.addEventListener('abort', stop, { once: true });
  });
}
