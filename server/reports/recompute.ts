import type { Database } from '#platform/database.ts';
import { ProblemError } from '#platform/problems.ts';
import {
  type ComputedReport,
  computeInThread,
  loadComputationInput,
} from '#server/analyses/service.ts';
import type { ReportRow } from './store.ts';

/** A recomputation that takes longer than this is broken off. */
const RECOMPUTATION_MS_MAX = 10 * 60_000;

/**
 * Computes reports again, one after the other: each takes a processor for itself, and the process
 * that answers stations should not lose more than one to them.
 */
export function recomputeOneAtATime(
  database: Database,
): (report: ReportRow) => Promise<ComputedReport> {
  let last: Promise<unknown> = Promise.resolve();
  return (report) => {
    const mine = last.then(() => recompute(database, report));
    last = mine.catch(() => undefined);
    return mine;
  };
}

async function recompute(database: Database, report: ReportRow): Promise<ComputedReport> {
  const stored = await loadComputationInput(database, report);
  // The hashes that count are those in the report, not those kept beside what they were made of.
  const { protocolSha256, snapshotSha256 } = report;
  const input = { ...stored, protocolSha256, snapshotSha256 };
  const { outcome } = computeInThread(input, {
    signal: AbortSignal.timeout(RECOMPUTATION_MS_MAX),
    onProgress: () => undefined,
  });
  const ended = await outcome;
  switch (ended.kind) {
    case 'computed':
      return ended.report;
    case 'erased':
      throw new ProblemError(
        'snapshot-erased',
        `The data of ${erased(ended.participants)} under report ${report.number} were erased ` +
          'since it was filed. It can be read and checked against its hash, not computed again.',
      );
    case 'altered':
      throw new ProblemError(
        'report-altered',
        `The ${ended.what} of report ${report.number} is no longer what the report was made from.`,
      );
    case 'stopped':
    case 'fault':
      throw new Error(`The recomputation of report ${report.id} ended as ${ended.kind}.`);
  }
}

function erased(participants: number): string {
  return participants === 1 ? '1 participant' : `${participants} participants`;
}
