import { answered, type Connection } from './connection.ts';
import { Pages } from './pages.ts';
import { pageQuery } from './places.ts';
import type {
  AuditEntry,
  AuditPublicKey,
  Checkpoint,
  KeptCheckpoint,
  Verification,
} from './schemas.ts';

/** The audit chains: one a study, and `administration`. */
export class Audit {
  readonly #connection: Connection;

  constructor(connection: Connection) {
    this.#connection = connection;
  }

  /** Entries of a chain in order: `administration`, or the id of a study. */
  entries(chain: string): Pages<AuditEntry> {
    return new Pages((cursor) => {
      const params = { path: { chain }, query: pageQuery(cursor) };
      return answered(this.#connection.api.GET('/v1/audit/chains/{chain}/entries', { params }));
    });
  }

  /** Signs the heads of all chains. Keep the answer where the service's administrators cannot. */
  checkpoint(): Promise<KeptCheckpoint> {
    return answered(this.#connection.api.POST('/v1/audit/checkpoints'));
  }

  checkpoints(): Pages<KeptCheckpoint> {
    return new Pages((cursor) => {
      const params = { query: pageQuery(cursor) };
      return answered(this.#connection.api.GET('/v1/audit/checkpoints', { params }));
    });
  }

  /** Recomputes the chains from their rows; against a checkpoint that was kept, if one is given. */
  verify(checkpoint?: Checkpoint): Promise<Verification> {
    const body =
      checkpoint === undefined
        ? {}
        : { checkpoint: { document: checkpoint.document, signature: checkpoint.signature } };
    return answered(this.#connection.api.POST('/v1/audit/verifications', { body }));
  }

  /** The public half of the key that signs checkpoints. */
  publicKey(): Promise<AuditPublicKey> {
    return answered(this.#connection.api.GET('/v1/audit/public-key'));
  }
}
