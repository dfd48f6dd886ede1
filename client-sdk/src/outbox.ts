import type { Connection } from './connection.ts';
import type { OutboxItem, OutboxStorage } from './outbox-storage.ts';
import { NetworkError, ProblemError, UnreadableAnswerError } from './problems.ts';
import { pause } from './retry.ts';

/** What an outbox needs of a client: `new Fairturn(…)` is one. */
export interface HasConnection {
  readonly connection: Connection;
}

export interface OutboxOptions {
  readonly fairturn: HasConnection;
  readonly storage: OutboxStorage;
  /** Called for each item that the service took, with its answer. */
  readonly onSent?: (item: OutboxItem, answer: unknown) => void;
  /** Called for each item that the service refused; it is set aside. */
  readonly onSetAside?: (item: OutboxItem) => void;
}

/** How a round of sending ended. */
export interface FlushOutcome {
  readonly sent: number;
  readonly setAside: number;
  /** Items that still wait; 0 unless the round was stopped. */
  readonly waiting: number;
  /** What stopped it: no link, a token that is not valid any more, a service that cannot now. */
  readonly stoppedBy: Error | null;
}

/** What is put in, beside the number, key and time that the outbox gives it. */
export interface OutboxMessage {
  readonly path: string;
  readonly body: string;
  readonly mediaType?: string;
}

/** An item that the service failed at this often is set aside, so that others get their turn. */
const SERVER_FAULTS_MAX = 5;

/**
 * Sends what a station produces, in order and once, whatever happens to the link or the station.
 *
 * An item is written down before it is sent and crossed out after it was answered. Between the two
 * it may be sent again, always under the same Idempotency-Key, so the service does it once. (Keys
 * belong to a token: exchange a station's token while its outbox is empty.) An item that the
 * service refuses is set aside with its problem and does not hold up those behind it.
 */
export class Outbox {
  readonly #options: OutboxOptions;
  readonly #items = new Map<number, OutboxItem>();
  readonly #serverFaults = new Map<number, number>();
  #lastNumber: number;
  #flushing: Promise<FlushOutcome> | null = null;
  #changing: Promise<unknown> = Promise.resolve();

  private constructor(options: OutboxOptions, items: readonly OutboxItem[]) {
    this.#options = options;
    for (const item of [...items].sort((a, b) => a.number - b.number)) {
      this.#items.set(item.number, item);
    }
    this.#lastNumber = Math.max(0, ...this.#items.keys());
  }

  /** Opens an outbox with what was left in it. */
  static async open(options: OutboxOptions): Promise<Outbox> {
    return new Outbox(options, await options.storage.load());
  }

  /** What waits to be sent, first in line first. */
  get waiting(): OutboxItem[] {
    return [...this.#items.values()].filter(({ problem }) => problem === null);
  }

  /** What the service refused, each with its `problem`. */
  get setAside(): OutboxItem[] {
    return [...this.#items.values()].filter(({ problem }) => problem !== null);
  }

  /** Writes a message down; resolves once it would survive a restart. Sending is `flush`'s work. */
  add(message: OutboxMessage): Promise<OutboxItem> {
    return this.#inTurn(async () => {
      const item: OutboxItem = {
        number: this.#lastNumber + 1,
        key: crypto.randomUUID(),
        path: message.path,
        mediaType: message.mediaType ?? 'application/json',
        body: message.body,
        operator: this.#options.fairturn.connection.options.operator ?? null,
        queuedAt: new Date().toISOString(),
        problem: null,
      };
      await this.#options.storage.put(item);
      this.#lastNumber = item.number;
      this.#items.set(item.number, item);
      return item;
    });
  }

  /** Sends what waits, in order, until nothing does or the service cannot be reached. */
  flush(signal?: AbortSignal): Promise<FlushOutcome> {
    this.#flushing ??= this.#sendAll(signal).finally(() => {
      this.#flushing = null;
    });
    return this.#flushing;
  }

  /** Flushes again and again, until the signal says stop. */
  async keepSending(options: { everyMs: number; signal: AbortSignal }): Promise<void> {
    while (!options.signal.aborted) {
      try {
        if (this.waiting.length > 0) await this.flush(options.signal);
        await pause(options.everyMs, options.signal);
      } catch (error) {
        if (!options.signal.aborted) throw error;
      }
    }
  }

  /** Throws an item that was set aside away for good. */
  discard(number: number): Promise<void> {
    return this.#inTurn(() => this.#remove(this.#setAsideItem(number)));
  }

  /** Puts an item that was set aside at the end of the line, as a new request. */
  sendAgain(number: number): Promise<OutboxItem> {
    return this.#inTurn(async () => {
      const old = this.#setAsideItem(number);
      const key = crypto.randomUUID();
      const item = { ...old, number: this.#lastNumber + 1, key, problem: null };
      await this.#options.storage.put(item);
      this.#lastNumber = item.number;
      this.#items.set(item.number, item);
      await this.#remove(old);
      return item;
    });
  }

  /** Ends a round of sending that is under way, then closes the storage. */
  async close(): Promise<void> {
    await this.#flushing?.catch(() => undefined);
    await this.#inTurn(() => this.#options.storage.close());
  }

  async #sendAll(signal?: AbortSignal): Promise<FlushOutcome> {
    let sent = 0;
    let setAside = 0;
    for (let item = this.waiting[0]; item !== undefined; item = this.waiting[0]) {
      const { stoppedBy, refused } = await this.#sendOne(item, signal);
      if (stoppedBy !== null) return { sent, setAside, waiting: this.waiting.length, stoppedBy };
      if (refused) setAside += 1;
      else sent += 1;
    }
    return { sent, setAside, waiting: 0, stoppedBy: null };
  }

  async #sendOne(
    item: OutboxItem,
    signal?: AbortSignal,
  ): Promise<{ stoppedBy: Error | null; refused: boolean }> {
    let answer: unknown;
    try {
      answer = await this.#send(item, signal);
    } catch (error) {
      if (!(error instanceof ProblemError) || !this.#isRefusal(item, error)) {
        if (error instanceof ProblemError || isOutage(error)) {
          return { stoppedBy: error, refused: false };
        }
        throw error;
      }
      const refusedItem = { ...item, problem: error.toProblem() };
      await this.#inTurn(async () => {
        await this.#options.storage.put(refusedItem);
        this.#items.set(item.number, refusedItem);
      });
      this.#options.onSetAside?.(refusedItem);
      return { stoppedBy: null, refused: true };
    }
    await this.#inTurn(() => this.#remove(item));
    this.#options.onSent?.(item, answer);
    return { stoppedBy: null, refused: false };
  }

  async #send(item: OutboxItem, signal?: AbortSignal): Promise<unknown> {
    const response = await this.#options.fairturn.connection.send({
      method: 'POST',
      path: item.path,
      body: item.body,
      headers: {
        'content-type': item.mediaType,
        'idempotency-key': item.key,
        ...(item.operator === null ? {} : { 'operator-code': item.operator }),
      },
      ...(signal === undefined ? {} : { signal }),
    });
    const text = await response.text();
    return text === '' ? null : JSON.parse(text);
  }

  /** Does this answer speak about the item, rather than about the token or the moment? */
  #isRefusal(item: OutboxItem, error: ProblemError): boolean {
    if (error.status === 401 || error.status === 429 || error.status === 503) return false;
    if (error.status < 500) return true;
    const faults = (this.#serverFaults.get(item.number) ?? 0) + 1;
    this.#serverFaults.set(item.number, faults);
    return faults >= SERVER_FAULTS_MAX;
  }

  #setAsideItem(number: number): OutboxItem {
    const item = this.#items.get(number);
    if (item !== undefined && item.problem !== null) return item;
    throw new RangeError(`No item ${number} was set aside.`);
  }

  async #remove(item: OutboxItem): Promise<void> {
    await this.#options.storage.remove(item.number);
    this.#items.delete(item.number);
    this.#serverFaults.delete(item.number);
  }

  /** One change of the storage at a time. */
  #inTurn<Result>(change: () => Promise<Result>): Promise<Result> {
    const result = this.#changing.then(change);
    this.#changing = result.catch(() => undefined);
    return result;
  }
}

function isOutage(error: unknown): error is NetworkError | UnreadableAnswerError {
  return error instanceof NetworkError || error instanceof UnreadableAnswerError;
}
