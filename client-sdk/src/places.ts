import { answered, type Connection } from './connection.ts';
import { Pages } from './pages.ts';
import type { Account, CreatedToken, Lab, NewToken, Site, Station, Token } from './schemas.ts';

/** Items asked for at once while a list is walked. */
export const PAGE_LIMIT = 200;

/** Query of a page, without a cursor for the first. */
export function pageQuery(cursor: string | undefined): { limit: number; cursor?: string } {
  return cursor === undefined ? { limit: PAGE_LIMIT } : { limit: PAGE_LIMIT, cursor };
}

/** Labs: the organisations. */
export class Labs {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  create(lab: { name: string }): Promise<Lab> {
    return answered(this.#connection.api.POST('/v1/labs', { body: lab }));
  }

  list(): Pages<Lab> {
    return new Pages((cursor) =>
      answered(this.#connection.api.GET('/v1/labs', { params: { query: pageQuery(cursor) } })),
    );
  }
}

/** Sites: the places where labs test. */
export class Sites {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  create({ labId, name }: { labId: string; name: string }): Promise<Site> {
    const params = { path: { labId } };
    const body = { name };
    return answered(this.#connection.api.POST('/v1/labs/{labId}/sites', { params, body }));
  }

  list(filter: { labId?: string } = {}): Pages<Site> {
    return new Pages((cursor) => {
      const query = { ...filter, ...pageQuery(cursor) };
      return answered(this.#connection.api.GET('/v1/sites', { params: { query } }));
    });
  }
}

/** Stations: the testing machines of a site, each with a token of its own. */
export class Stations {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  create({ siteId, name }: { siteId: string; name: string }): Promise<Station> {
    const params = { path: { siteId } };
    const body = { name };
    return answered(this.#connection.api.POST('/v1/sites/{siteId}/stations', { params, body }));
  }

  list({ siteId }: { siteId: string }): Pages<Station> {
    return new Pages((cursor) => {
      const params = { path: { siteId }, query: pageQuery(cursor) };
      return answered(this.#connection.api.GET('/v1/sites/{siteId}/stations', { params }));
    });
  }
}

/** Accounts: the people who sign in. */
export class Accounts {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  /** `labId` is null for people of the service itself. */
  create(account: { name: string; labId: string | null }): Promise<Account> {
    return answered(this.#connection.api.POST('/v1/accounts', { body: account }));
  }

  list(): Pages<Account> {
    return new Pages((cursor) =>
      answered(this.#connection.api.GET('/v1/accounts', { params: { query: pageQuery(cursor) } })),
    );
  }

  /** Closes an account and revokes its tokens. */
  close(accountId: string): Promise<Account> {
    const params = { path: { accountId } };
    return answered(this.#connection.api.POST('/v1/accounts/{accountId}/closure', { params }));
  }
}

/** Tokens: a role and a place, expiring and revocable. */
export class Tokens {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  /**
   * Makes a token. Its secret is shown once: when the link was cut after the service had answered,
   * the repeat answers with `token: null`; revoke that token then, and make another.
   */
  create(token: NewToken): Promise<CreatedToken> {
    return answered(this.#connection.api.POST('/v1/tokens', { body: token }));
  }

  list(): Pages<Token> {
    return new Pages((cursor) =>
      answered(this.#connection.api.GET('/v1/tokens', { params: { query: pageQuery(cursor) } })),
    );
  }

  /** Role and place of the token in use. */
  own(): Promise<Token> {
    return answered(this.#connection.api.GET('/v1/tokens/own'));
  }

  revoke(tokenId: string): Promise<Token> {
    const params = { path: { tokenId } };
    return answered(this.#connection.api.POST('/v1/tokens/{tokenId}/revocation', { params }));
  }
}
