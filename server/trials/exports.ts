import { PassThrough, Readable } from 'node:stream';
import { pipeline } from 'node:stream/promises';
import { actorOf, type Call } from '#platform/call.ts';
import { type Database, type SqlTransaction, sqlExecutor } from '#platform/database.ts';
import {
  type ParticipantRecord,
  participantCodes,
  participantRecords,
} from '#server/allocations/service.ts';
import { recordLook } from '#server/audit/log.ts';
import { registeredProtocol, requireVisibleStudy, type Study } from '#server/studies/service.ts';
import { csvHeader, csvLine } from './export-csv.ts';
import type { ExportedTrial, ExportQuery } from './schemas.ts';
import * as store from './store-trials.ts';
import { parseContent } from './trial-content.ts';

export const EXPORT_MEDIA_TYPES = ['application/x-ndjson', 'text/csv'] as const;
export type ExportMediaType = (typeof EXPORT_MEDIA_TYPES)[number];

/**
 * The trials of a study as a stream of text, by participant (in the order of arrival), period,
 * repetition and version. Trials of somebody who was erased are in it as tombstones, without code,
 * values or flags. It is a look: counted and logged before the first byte, whatever becomes of the
 * stream. Audit event `looked`.
 *
 * @throws {ProblemError} `not-found`
 */
export async function exportTrials(
  database: Database,
  call: Call,
  studyId: string,
  { mediaType, versions }: { readonly mediaType: ExportMediaType } & ExportQuery,
): Promise<Readable> {
  const study = await database.inSqlTransaction(async (tx) => {
    const visible = await requireVisibleStudy(sqlExecutor(tx), call.principal, studyId);
    await recordLook(sqlExecutor(tx), {
      studyId: visible.id,
      kind: 'export',
      duringEnrolment: visible.state !== 'closed',
      actor: actorOf(call),
      subject: visible.id,
      details: { mediaType, versions },
      at: call.now,
    });
    return visible;
  });
  const stream = new PassThrough();
  const texts = (tx: SqlTransaction) => exportTexts(tx, study, { mediaType, versions });
  database
    // One moment for participants and trials.
    .inReadingTransaction((tx) => pipeline(Readable.from(texts(tx)), stream))
    .catch((error: unknown) => {
      stream.destroy(error instanceof Error ? error : new Error('The export failed.'));
    });
  return stream;
}

async function* exportTexts(
  tx: SqlTransaction,
  study: Study,
  { mediaType, versions }: { readonly mediaType: ExportMediaType } & ExportQuery,
): AsyncGenerator<string> {
  const records = await participantRecords(tx, study.id);
  const codes = await participantCodes(tx, study.id);
  const byId = new Map(records.map((record) => [record.id, record]));
  const measures = await measuresOf(tx, study, records);
  if (mediaType === 'text/csv') yield csvHeader(measures);
  for await (const rows of store.streamTrials(tx, study.id, versions)) {
    const lines = rows.map((row) => {
      const record = byId.get(row.participantId);
      if (record === undefined) throw new Error(`The trial ${row.id} belongs to nobody.`);
      const trial = exportedTrial(row, record, codes.get(record.id) ?? null);
      return mediaType === 'text/csv' ? csvLine(trial, measures) : `${JSON.stringify(trial)}\n`;
    });
    yield lines.join('');
  }
}

function exportedTrial(
  row: store.TrialRow,
  record: ParticipantRecord,
  code: string | null,
): ExportedTrial {
  const content = row.content === null ? null : parseContent(row.content);
  const { stratum, siteId, slotNumber, protocolVersion } = record;
  return {
    participant: code,
    period: row.period,
    repetition: row.repetition,
    condition: row.condition,
    recordId: content?.recordId ?? null,
    startedAt: content?.startedAt ?? null,
    endedAt: content?.endedAt ?? null,
    note: content?.note ?? null,
    values: content?.values ?? {},
    missing: content?.missing ?? {},
    trialId: row.id,
    participantId: record.id,
    siteId,
    stratum,
    slotNumber,
    protocolVersion,
    assignedCondition: record.sequence[row.period - 1] ?? '',
    deviation: row.deviation,
    flags: row.flags,
    version: row.version,
    current: row.current,
    erased: content === null,
    uploadId: row.uploadId,
    receivedAt: row.receivedAt.toISOString(),
  };
}

/** Measures of the versions that have participants, in the order in which protocols name them. */
async function measuresOf(
  tx: SqlTransaction,
  study: Study,
  records: readonly ParticipantRecord[],
): Promise<string[]> {
  const versions = [...new Set(records.map((record) => record.protocolVersion))].sort(
    (a, b) => a - b,
  );
  const keys = new Set<string>();
  for (const version of versions) {
    const { protocol } = await registeredProtocol(sqlExecutor(tx), study.id, version);
    for (const { key } of protocol.measures) keys.add(key);
  }
  return [...keys];
}
