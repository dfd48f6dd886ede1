/** One page of a list as the service sends it. */
export interface Page<Item> {
  readonly items: readonly Item[];
  readonly nextCursor: string | null;
}

/**
 * A list that is fetched page by page while it is walked:
 * `for await (const site of fairturn.sites.list()) …`
 */
export class Pages<Item> implements AsyncIterable<Item> {
  readonly #fetchPage: (cursor: string | undefined) => Promise<Page<Item>>;

  constructor(fetchPage: (cursor: string | undefined) => Promise<Page<Item>>) {
    this.#fetchPage = fetchPage;
  }

  async *[Symbol.asyncIterator](): AsyncGenerator<Item, void, undefined> {
    for await (const page of this.pages()) yield* page;
  }

  /** Whole pages instead of single items. */
  async *pages(): AsyncGenerator<readonly Item[], void, undefined> {
    let cursor: string | undefined;
    do {
      const page: Page<Item> = await this.#fetchPage(cursor);
      yield page.items;
      cursor = page.nextCursor ?? undefined;
    } while (cursor !== undefined);
  }

  /** The whole list at once. */
  async all(): Promise<Item[]> {
    const items: Item[] = [];
    for await (const page of this.pages()) items.push(...page);
    return items;
  }
}
