import type { SnapshotTrial } from '#core/analysis/snapshot.ts';
import type { SqlTransaction } from '#platform/database.ts';
import * as store from './store-trials.ts';
import { parseContent } from './trial-content.ts';
import { momentOf } from './trial-time.ts';

/**
 * The current version of every trial of a study, a batch at a time, by participant, period and
 * repetition; trials of somebody who was erased are left out. Times in UTC.
 */
export async function* trialRecordsForSnapshot(
  tx: SqlTransaction,
  studyId: string,
): AsyncGenerator<{ participantId: string; trial: SnapshotTrial }[]> {
  for await (const rows of store.streamTrials(tx, studyId, 'current')) {
    yield rows.flatMap((row) => {
      if (row.content === null) return [];
      return [{ participantId: row.participantId, trial: snapshotTrial(row, row.content) }];
    });
  }
}

function snapshotTrial(row: store.TrialRow, text: string): SnapshotTrial {
  const content = parseContent(text);
  const values: { [measure: string]: number | boolean | null } = { ...content.values };
  for (const measure of Object.keys(content.missing)) values[measure] = null;
  return {
    period: row.period,
    repetition: row.repetition,
    condition: row.condition,
    deviation: row.deviation,
    flags: row.flags,
    values,
    missing: content.missing,
    startedAt: utc(content.startedAt),
    endedAt: content.endedAt === null ? null : utc(content.endedAt),
  };
}

function utc(text: string): string {
  const moment = momentOf(text);
  if (moment === null) throw new Error('A stored time is a time.');
  return new Date(moment).toISOString();
}
