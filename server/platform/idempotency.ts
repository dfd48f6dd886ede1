import { z } from 'zod';
import type { Call } from './call.ts';
import type { Executor } from './database.ts';
import { ProblemError } from './problems.ts';

/** A status and a JSON body: what a creating request is answered with, first time and again. */
export interface Answer<Body> {
  readonly status: number;
  readonly body: Body;
  /** True when this is the stored answer to an earlier request with the same key and body. */
  readonly repeated: boolean;
}

const storedAnswer = z.object({
  request_hash: z.string(),
  status: z.number().int(),
  body: z.string(),
});

/**
 * Does `work` once per Idempotency-Key of a token and answers a repeat with the first answer.
 * The answer is stored in the transaction of the work, so both exist or neither; two requests with
 * the same key at once wait for each other on the primary key. Without a key the work is just done.
 *
 * @param keep  what is stored of the body for a repeat; the place to leave a secret out
 * @param parse reads a stored body back; the response schema
 * @throws {ProblemError} `idempotency-key-reused` when the key came with another request before
 */
export async function once<Body>(
  executor: Executor,
  call: Call,
  options: {
    readonly parse: (stored: unknown) => Body;
    readonly keep?: (body: Body) => Body;
    readonly work: () => Promise<{
      status: number;
      body: Body;
      /** Whom the request is about, so that erasing the participant reaches what is kept of it. */
      participantId?: string;
    }>;
  },
): Promise<Answer<Body>> {
  if (call.idempotency === null) {
    const { status, body } = await options.work();
    return { status, body, repeated: false };
  }
  const { key, requestHash } = call.idempotency;
  const { tokenId } = call.principal;
  const claimed = await executor.query(
    `insert into idempotency_answers (token_id, key, request_hash, status, body, created_at)
     values ($1::uuid, $2, $3, 0, '', $4::timestamptz) on conflict do nothing returning key`,
    [tokenId, key, requestHash, call.now],
  );
  if (claimed.length === 0) {
    const rows = await executor.query(
      `select request_hash, status, body from idempotency_answers
       where token_id = $1::uuid and key = $2`,
      [tokenId, key],
    );
    const first = storedAnswer.parse(rows[0]);
    if (first.request_hash !== requestHash) {
      throw new ProblemError(
        'idempotency-key-reused',
        'This key came with another request before. Use a new key for a new request.',
      );
    }
    return { status: first.status, body: options.parse(JSON.parse(first.body)), repeated: true };
  }
  const { status, body, participantId } = await options.work();
  const kept = options.keep === undefined ? body : options.keep(body);
  await executor.query(
    `update idempotency_answers set status = $3::int, body = $4, participant_id = $5::uuid
     where token_id = $1::uuid and key = $2`,
    [tokenId, key, status, JSON.stringify(kept), participantId ?? null],
  );
  return { status, body, repeated: false };
}

/**
 * Empties what is kept of requests about a participant: the hash of a request that holds a code is
 * as good as the code. The keys stay used, so that such a request is refused when it comes again.
 */
export async function forgetAnswers(executor: Executor, participantId: string): Promise<void> {
  await executor.query(
    `update idempotency_answers set request_hash = '', body = '' where participant_id = $1::uuid`,
    [participantId],
  );
}
