import { answered, type Connection } from './connection.ts';
import type { Recomputation, ReportDetails } from './schemas.ts';

/**
 * A filed report: immutable, numbered, and recomputable by anybody who has what it was made from.
 */
export class Report {
  readonly id: string;
  readonly #connection: Connection;

  constructor(connection: Connection, id: string) {
    this.#connection = connection;
    this.id = id;
  }

  /** Number, time, requester and hashes, with the body as JSON. */
  details(): Promise<ReportDetails> {
    const params = { path: { reportId: this.id } };
    return answered(this.#connection.api.GET('/v1/reports/{reportId}', { params }));
  }

  /** The exact bytes of the body, which the report's SHA-256 is about. */
  async body(): Promise<Uint8Array> {
    return await this.#bytes('body');
  }

  /** The report as one HTML page that needs nothing else. */
  async html(): Promise<string> {
    return new TextDecoder().decode(await this.#bytes('page'));
  }

  /** Has the service compute the report again and compare the bytes. */
  recompute(): Promise<Recomputation> {
    const params = { path: { reportId: this.id } };
    return answered(this.#connection.api.POST('/v1/reports/{reportId}/recomputations', { params }));
  }

  async #bytes(part: 'body' | 'page'): Promise<Uint8Array> {
    const path = `/v1/reports/${encodeURIComponent(this.id)}/${part}`;
    const response = await this.#connection.send({ method: 'GET', path });
    return new Uint8Array(await response.arrayBuffer());
  }
}
