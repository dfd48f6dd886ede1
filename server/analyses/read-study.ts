import type {
  Snapshot,
  SnapshotParticipant,
  SnapshotParticipantContent,
  SnapshotSite,
  SnapshotTrial,
} from '#core/analysis/snapshot.ts';
import { assert } from '#core/errors.ts';
import type { JsonValue } from '#core/hashing/canonical-json.ts';
import {
  type Executor,
  type RecordsTransaction,
  type SqlTransaction,
  sqlExecutor,
} from '#platform/database.ts';
import { findSites } from '#server/access/service.ts';
import { type ParticipantRecord, participantRecords } from '#server/allocations/service.ts';
import { registeredProtocol, requireStudy, studySites } from '#server/studies/service.ts';
import { trialRecordsForSnapshot } from '#server/trials/service.ts';

/** A study as read at one moment, before it is split into what is hashed and what can be erased. */
export interface Reading {
  readonly snapshot: Omit<Snapshot, 'participants'> & {
    readonly participants: readonly Omit<SnapshotParticipant, 'contentCommitment'>[];
  };
  /** Which protocol versions' participants are in, and which are not; for the audit log. */
  readonly accounted: { readonly [key: string]: JsonValue };
}

/**
 * Reads what an analysis by one protocol version runs on: the participants of every version that
 * has the same conditions in the same number of periods, each with the current version of each of
 * its trials. Participants of other versions cannot be compared with them and are only counted.
 *
 * Looks are left empty: they are counted when the snapshot is stored.
 *
 * @param records reads the sites' names, which never change, beside the transaction
 */
export async function readStudy(
  tx: SqlTransaction,
  records: RecordsTransaction,
  analysis: { readonly studyId: string; readonly protocolVersion: number },
): Promise<Reading> {
  const { studyId } = analysis;
  const executor = sqlExecutor(tx);
  const study = await requireStudy(executor, studyId);
  assert(study.state !== 'draft', 'an analysed study is registered');
  const everybody = await participantRecords(tx, studyId);
  const versions = await comparableVersions(
    tx,
    analysis,
    everybody.map((record) => record.protocolVersion),
  );
  const included = everybody.filter((record) => versions.has(record.protocolVersion));
  const trials = await trialsByParticipant(tx, studyId);
  return {
    snapshot: {
      studyId,
      enrolment: study.state,
      protocolVersions: [...versions].map(([number, sha256]) => ({ number, sha256 })),
      sites: await sitesOf(executor, records, studyId),
      looks: [],
      participants: included.map((record) => ({
        ...frameOf(record),
        content: record.erasedAt === null ? contentOf(record.id, trials) : null,
      })),
    },
    accounted: {
      protocolVersions: [...versions.keys()],
      participantsOfOtherVersions: everybody.length - included.length,
    },
  };
}

async function sitesOf(
  executor: Executor,
  records: RecordsTransaction,
  studyId: string,
): Promise<SnapshotSite[]> {
  const sites = await studySites(executor, studyId);
  const known = await findSites(
    records,
    sites.map(({ siteId }) => siteId),
  );
  const names = new Map(known.map(({ id, name }) => [id, name]));
  return sites.map(({ siteId, targetEnrolment }) => {
    const label = names.get(siteId);
    assert(label !== undefined, 'a site of a study has a name');
    return { siteId, label, targetEnrolment };
  });
}

/** Version number to its hash, for those whose participants the analysed version can take in. */
async function comparableVersions(
  tx: SqlTransaction,
  analysis: { readonly studyId: string; readonly protocolVersion: number },
  allocated: readonly number[],
): Promise<Map<number, string>> {
  const executor = sqlExecutor(tx);
  const read = (number: number) => registeredProtocol(executor, analysis.studyId, number);
  const analysed = await read(analysis.protocolVersion);
  const shape = (version: typeof analysed) =>
    JSON.stringify([version.conditions.map(({ key }) => key), version.protocol.periods.count]);
  const comparable = new Map<number, string>();
  for (const number of new Set(allocated)) {
    const version = await read(number);
    if (shape(version) === shape(analysed)) comparable.set(number, version.sha256);
  }
  return comparable;
}

async function trialsByParticipant(
  tx: SqlTransaction,
  studyId: string,
): Promise<Map<string, SnapshotTrial[]>> {
  const byParticipant = new Map<string, SnapshotTrial[]>();
  for await (const batch of trialRecordsForSnapshot(tx, studyId)) {
    for (const { participantId, trial } of batch) {
      const own = byParticipant.get(participantId);
      if (own === undefined) byParticipant.set(participantId, [trial]);
      else own.push(trial);
    }
  }
  return byParticipant;
}

function frameOf(
  record: ParticipantRecord,
): Omit<SnapshotParticipant, 'content' | 'contentCommitment'> {
  const { ending } = record;
  return {
    id: record.id,
    siteId: record.siteId,
    stratum: record.stratum,
    protocolVersion: record.protocolVersion,
    slotNumber: record.slotNumber,
    sequence: record.sequence,
    arrivedAt: record.arrivedAt.toISOString(),
    ending: ending === null ? null : { ...ending, at: ending.at.toISOString() },
    periods: record.periods.map((period) => ({
      period: period.period,
      startedAt: period.startedAt?.toISOString() ?? null,
      completedAt: period.completedAt?.toISOString() ?? null,
      deviations: period.deviations,
    })),
  };
}

function contentOf(
  participantId: string,
  trials: ReadonlyMap<string, SnapshotTrial[]>,
): SnapshotParticipantContent {
  return { participantId, trials: trials.get(participantId) ?? [] };
}
