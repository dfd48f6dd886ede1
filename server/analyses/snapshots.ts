import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import { readRegisteredProtocol } from '#server/studies/service.ts';
import type { ComputationInput } from './computation.ts';
import * as snapshotStore from './store-snapshots.ts';

/** A frozen snapshot as an analysis or a report refers to it. */
export interface SnapshotReference {
  readonly studyId: string;
  readonly protocolVersion: number;
  readonly snapshotId: string;
  readonly seed: string;
}

/** Everything that the computation of an analysis or the recomputation of a report reads. */
export function loadComputationInput(
  database: Database,
  reference: SnapshotReference,
): Promise<ComputationInput> {
  return database.inSqlTransaction(async (tx) => {
    const { studyId, protocolVersion, snapshotId, seed } = reference;
    const registered = await readRegisteredProtocol(sqlExecutor(tx), studyId, protocolVersion);
    const snapshot = await snapshotStore.selectSnapshot(tx, snapshotId);
    return {
      protocol: registered.protocol,
      protocolVersion,
      protocolSha256: registered.sha256,
      snapshotBody: snapshot.body,
      snapshotSha256: snapshot.sha256,
      contents: await snapshotStore.selectSnapshotContents(tx, snapshotId),
      seed,
    };
  });
}

/**
 * Forgets one participant's part of every snapshot, in the erasure's transaction. The row of the
 * participant is locked first: a freezing under way either ends before and is found here, or waits
 * and then sees the erasure.
 */
export async function forgetSnapshotParticipant(
  tx: SqlTransaction,
  participantId: string,
): Promise<void> {
  await snapshotStore.lockParticipant(tx, participantId);
  await snapshotStore.deleteSnapshotParticipants(tx, participantId);
}
