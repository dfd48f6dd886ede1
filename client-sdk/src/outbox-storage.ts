import type { Problem } from './problems.ts';

/** Something that is to be sent once, and in its turn. */
export interface OutboxItem {
  /** Place in the order of sending. */
  readonly number: number;
  /** The Idempotency-Key of every try: what makes "at least once" into "once". */
  readonly key: string;
  /** From `/v1` on. */
  readonly path: string;
  readonly mediaType: string;
  readonly body: string;
  /** Who stood behind it at the station. */
  readonly operator: string | null;
  /** ISO 8601, by the station's clock. */
  readonly queuedAt: string;
  /** What the service said against it; null while it waits. */
  readonly problem: Problem | null;
}

/**
 * Where an outbox keeps its items. `put` and `remove` resolve only when what they did would survive
 * the station's restart.
 */
export interface OutboxStorage {
  /** All items, in any order. */
  load(): Promise<OutboxItem[]>;
  /** Adds an item, or replaces the one of the same number. */
  put(item: OutboxItem): Promise<void>;
  remove(number: number): Promise<void>;
  close(): Promise<void>;
}

/**
 * A small store of texts by key, given by whoever uses the client: over localStorage, IndexedDB, a
 * file. The methods may answer at once or later.
 */
export interface KeyValueStore {
  get(key: string): string | null | Promise<string | null>;
  set(key: string, value: string): void | Promise<void>;
  delete(key: string): void | Promise<void>;
  keys(): Iterable<string> | Promise<Iterable<string>>;
}

/** Keeps texts in memory: for pipelines and tests, where nothing has to survive a restart. */
export function memoryStore(): KeyValueStore {
  const values = new Map<string, string>();
  return {
    get: (key) => values.get(key) ?? null,
    set: (key, value) => {
      values.set(key, value);
    },
    delete: (key) => {
      values.delete(key);
    },
    keys: () => [...values.keys()],
  };
}

/**
 * Keeps an outbox in a key-value store, one key an item. Only one outbox may use a store and prefix
 * at a time: a browser page takes a Web Lock first.
 */
export function outboxIn(store: KeyValueStore, prefix = 'fairturn-outbox/'): OutboxStorage {
  const keyOf = (number: number) => `${prefix}${String(number).padStart(12, '0')}`;
  return {
    load: async () => {
      const items: OutboxItem[] = [];
      for (const key of await store.keys()) {
        const text = key.startsWith(prefix) ? await store.get(key) : null;
        if (text !== null) items.push(JSON.parse(text));
      }
      return items;
    },
    put: async (item) => {
      await store.set(keyOf(item.number), JSON.stringify(item));
    },
    remove: async (number) => {
      await store.delete(keyOf(number));
    },
    close: async () => undefined,
  };
}
